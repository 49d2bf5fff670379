import type { Reporter, TestModule } from "vitest/node";

/** Closes the run with one plain line: 'N passed, N failed, N skipped'. */
export default class PlainReporter implements Reporter {
  onTestRunEnd(modules: ReadonlyArray<TestModule>, errors: ReadonlyArray<unknown> = []): void {
    let passed = 0;
    let failed = errors.length;
    let skipped = 0;
    for (const module of modules) {
      if (module.state() === "failed" && module.errors().length > 0) failed += 1;
      for (const test of module.children.allTests()) {
        const { state } = test.result();
        if (state === "passed") passed += 1;
        else if (state === "failed") failed += 1;
        else skipped += 1;
      }
    }
    // On exit: after the default reporter's summary and any coverage text.
    process.once("exit", () => process.stdout.write(`\n${passed} passed, ${failed} failed, ${skipped} skipped\n`));
  }
}
