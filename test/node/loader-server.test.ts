// The loader against a real server, with the mistakes that deployed pages meet.
import { createServer, type Server } from "node:http";
import type { AddressInfo } from "node:net";
import { afterAll, beforeAll, expect, test } from "vitest";
import { loadKernel } from "../../bindings/load.js";
import { kernelBytes } from "../support/kernel.js";

let server: Server;
let base: string;
beforeAll(async () => {
  const bytes = new Uint8Array(await kernelBytes());
  server = createServer((request, response) => {
    const path = request.url ?? "";
    if (path === "/right.wasm") response.setHeader("content-type", "application/wasm").end(bytes);
    else if (path === "/untyped.wasm") response.end(bytes);
    else if (path === "/moved.wasm") response.writeHead(302, { location: "/right.wasm" }).end();
    else if (path === "/broken.wasm") response.writeHead(500).end("sorry");
    else response.setHeader("content-type", "text/html").end("<!doctype html><title>the application's only page</title>");
  });
  await new Promise<void>((resolve) => server.listen(0, "127.0.0.1", resolve));
  base = `http://127.0.0.1:${(server.address() as AddressInfo).port}`;
});
afterAll(() => new Promise((resolve) => server.close(resolve)));

test("the kernel loads by its URL with the right type, without a type, after a redirect, and by a Request", async () => {
  for (const source of ["/right.wasm", "/untyped.wasm", "/moved.wasm"].map((path) => base + path))
    expect((await loadKernel(source)).allocate(8)).toBeGreaterThan(0);
  expect((await loadKernel(new Request(`${base}/right.wasm`))).allocate(8)).toBeGreaterThan(0);
});

test("a fallback page, a server's error and a closed port are named with their URL", async () => {
  await expect(loadKernel(`${base}/elsewhere/kernel_bg.wasm`)).rejects.toThrowError(/elsewhere\/kernel_bg\.wasm is a page \(text\/html\)/);
  await expect(loadKernel(`${base}/broken.wasm`)).rejects.toThrowError(/broken\.wasm was answered with HTTP status 500/);
  await expect(loadKernel("http://127.0.0.1:1/kernel_bg.wasm")).rejects.toThrowError(/127\.0\.0\.1:1\/kernel_bg\.wasm cannot be read/);
});
