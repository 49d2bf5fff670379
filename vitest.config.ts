import { existsSync } from "node:fs";
import { playwright } from "@vitest/browser-playwright";
import { defineConfig } from "vitest/config";

const chromium = process.env.CHROMIUM_PATH ?? "/usr/bin/chromium";
const quiet = [
  "--no-sandbox",
  "--disable-gpu",
  "--disable-quic",
  "--no-first-run",
  "--disable-background-networking",
  "--disable-component-update",
  "--disable-sync",
];
if (process.env.CI && !existsSync(chromium)) throw new Error(`no Chromium at ${chromium}: run .tools/chromium.sh`);

/** Kernel and facade tests run everywhere; test/node needs Node (files, processes), test/browser needs a page. */
const everywhere = ["test/**/*.test.ts"];
const node = (name: string, kernelBuild: "plain" | "fused" | "debug", include: string[], exclude: string[], execArgv: string[] = []) => ({
  extends: true as const,
  test: { name, environment: "node", include, exclude, execArgv, provide: { kernelBuild } },
});
const browser = (name: string, kernelBuild: "plain" | "fused") => ({
  extends: true as const,
  test: {
    name,
    include: everywhere,
    exclude: ["test/node/**"],
    provide: { kernelBuild },
    browser: {
      enabled: true,
      headless: true,
      screenshotFailures: false,
      provider: playwright({ launchOptions: { executablePath: chromium, args: quiet } }),
      instances: [{ browser: "chromium" as const }],
    },
  },
});

export default defineConfig({
  build: { assetsInlineLimit: 0 },
  test: {
    reporters: ["default", "./test/support/plain-reporter.ts"],
    testTimeout: 120_000,
    hookTimeout: 60_000,
    coverage: { provider: "v8", include: ["src/**/*.ts", "bindings/**/*.ts"], reporter: ["text-summary"] },
    projects: [
      node("node", "plain", everywhere, ["test/browser/**"]),
      node("node-fused", "fused", everywhere, ["test/browser/**", "test/node/**"], ["--experimental-wasm-relaxed-simd"]),
      node("node-debug", "debug", ["test/kernel/**/*.test.ts"], []),
      ...(existsSync(chromium) ? [browser("chromium", "plain"), browser("chromium-fused", "fused")] : []),
    ],
  },
});
