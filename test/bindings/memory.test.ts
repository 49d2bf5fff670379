import { beforeAll, expect, test } from "vitest";
import { DisposedError, MemoryLimitError } from "../../bindings/errors.js";
import { Handle } from "../../bindings/handle.js";
import { kernel } from "../../bindings/loader.js";
import { copyFloats, copyInts, Loan, readFloatsInto, requireMemory, withLoan, writeFloats } from "../../bindings/memory.js";
import { initFacade } from "../support/facade.js";

beforeAll(initFacade);

test("what was copied in is read out after memory has grown and every earlier view is detached", () => {
  const before = kernel().memory.buffer;
  withLoan("A test", (loan) => {
    const floats = loan.floats([1.5, -0, 1e300]);
    const ints = loan.ints([1, -2]);
    loan.room(64 * 2 ** 20);
    expect(kernel().memory.buffer).not.toBe(before);
    expect(before.byteLength).toBe(0);
    expect(copyFloats(floats, 3)).toEqual(Float64Array.of(1.5, -0, 1e300));
    expect(copyInts(ints, 2)).toEqual(Int32Array.of(1, -2));
    writeFloats(floats, [7, 8]);
    const target = new Float64Array(3);
    readFloatsInto(target, floats);
    expect(target).toEqual(Float64Array.of(7, 8, 1e300));
  });
  expect(kernel().memoryUsed()).toBe(0);
});

test("a loan is given back when its use throws, and when one of its blocks is refused", () => {
  const refuse = () =>
    withLoan("A test", (loan) => {
      loan.floats([1, 2, 3]);
      loan.room(5 * 2 ** 30);
    });
  expect(refuse).toThrowError(MemoryLimitError);
  expect(kernel().memoryUsed()).toBe(0);
  const loan = new Loan("A test");
  loan.room(100);
  loan.giveBack();
  loan.giveBack();
  expect(kernel().memoryUsed()).toBe(0);
  expect(() => requireMemory("A test", 2 ** 33)).toThrowError(/A test needs 8589934592 bytes of kernel memory and 4294901760 are left/);
});

test("a handle frees once, and throws when it is used after that", () => {
  let freed = 0;
  const handle = new Handle({}, "Thing", 1234, () => {
    freed += 1;
  });
  expect(handle.address).toBe(1234);
  handle.dispose();
  handle.dispose();
  expect(freed).toBe(1);
  expect(() => handle.address).toThrowError(DisposedError);
  expect(() => handle.address).toThrowError(/This Thing was disposed/);
});
