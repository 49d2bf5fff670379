import fc from "fast-check";
import { beforeAll, expect, test } from "vitest";
import { type RawKernel, rawKernel } from "../support/kernel.js";

let kernel: RawKernel;
beforeAll(async () => {
  kernel = await rawKernel();
});

test("any sequence of allocations and releases keeps blocks apart, aligned, and ends with nothing in use", () => {
  const { raw, memory } = kernel;
  const step = fc.record({ bytes: fc.oneof(fc.nat(200), fc.nat(300_000)), victim: fc.nat(), free: fc.boolean() });
  fc.assert(
    fc.property(fc.array(step, { maxLength: 120 }), (steps) => {
      const held: { address: number; bytes: number; tag: number }[] = [];
      const free = (k: number) => {
        const [block] = held.splice(k, 1);
        const { address, bytes, tag } = block!;
        const view = new Uint8Array(memory.buffer, address, bytes);
        expect(view.every((v) => v === tag)).toBe(true);
        raw.release!(address);
      };
      for (const [k, { bytes, victim, free: drop }] of steps.entries()) {
        if (drop && held.length > 0) {
          free(victim % held.length);
          continue;
        }
        const address = raw.allocate!(bytes) >>> 0;
        expect(address).toBeGreaterThan(0);
        expect(address % 16).toBe(0);
        const tag = k & 255;
        new Uint8Array(memory.buffer, address, bytes).fill(tag);
        held.push({ address, bytes, tag });
      }
      while (held.length > 0) free(held.length - 1);
      expect(raw.memoryUsed!()).toBe(0);
    }),
  );
});

test("a request past the limit is refused with address 0 and leaves the rest as it was", () => {
  const { raw } = kernel;
  const first = raw.allocate!(1000) >>> 0;
  const used = raw.memoryUsed!();
  raw.setMemoryLimit!(used + 5000);
  expect(raw.allocate!(6000)).toBe(0);
  expect(raw.memoryUsed!()).toBe(used);
  const second = raw.allocate!(4000) >>> 0;
  expect(second).toBeGreaterThan(0);
  raw.setMemoryLimit!(2 ** 40);
  raw.release!(first);
  raw.release!(second);
  raw.release!(0);
  expect(raw.memoryUsed!()).toBe(0);
});

test("released neighbours join: memory does not grow when the same sizes come again", () => {
  const { raw } = kernel;
  const cycle = () => {
    const blocks = Array.from({ length: 50 }, (_, k) => raw.allocate!(10_000 + 977 * k));
    for (const k of [...blocks.keys()].sort((a, b) => ((a * 7) % 50) - ((b * 7) % 50))) raw.release!(blocks[k]!);
  };
  cycle();
  const capacity = raw.memoryCapacity!();
  for (let k = 0; k < 200; k += 1) cycle();
  expect(raw.memoryCapacity!()).toBe(capacity);
});
