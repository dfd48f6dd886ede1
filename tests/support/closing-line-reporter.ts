import type { Reporter, TestModule } from 'vitest/node';

/**
 * Prints vitest's own figures as one plain line, `N passed, N failed, N skipped`, after its
 * summary: continuous integration reads that line. A test file that could not be loaded, and an
 * error outside any test, count as failures, so that the line never looks greener than the run.
 */
export default class ClosingLineReporter implements Reporter {
  onTestRunEnd(modules: readonly TestModule[], unhandledErrors: readonly unknown[]): void {
    let passed = 0;
    let failed = unhandledErrors.length;
    let skipped = 0;
    for (const module of modules) {
      let failedHere = 0;
      for (const test of module.children.allTests()) {
        const { state } = test.result();
        if (state === 'passed') passed += 1;
        else if (state === 'failed') failedHere += 1;
        else skipped += 1;
      }
      // A file whose import or hook failed reports the module as failed without any failed test.
      failed += failedHere === 0 && module.state() === 'failed' ? 1 : failedHere;
    }
    process.stdout.write(`\n${passed} passed, ${failed} failed, ${skipped} skipped\n`);
  }
}
