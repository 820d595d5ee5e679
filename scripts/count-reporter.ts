import type { Reporter, TestModule } from 'vitest/node';

/** Prints the plain closing line, `N passed, N failed`, that a counter of test results can read. */
export default class CountReporter implements Reporter {
  onTestRunEnd(modules: ReadonlyArray<TestModule>): void {
    let passed = 0;
    let failed = 0;
    let skipped = 0;
    for (const module of modules) {
      const tests = [...module.children.allTests()];
      // A file that fails outside its tests (import, hook) counts once.
      if (module.state() === 'failed' && tests.every((test) => test.result().state !== 'failed')) failed++;
      for (const test of tests) {
        const { state } = test.result();
        if (state === 'passed') passed++;
        else if (state === 'failed') failed++;
        else skipped++;
      }
    }
    console.log(`\n${passed} passed, ${failed} failed${skipped ? `, ${skipped} skipped` : ''}`);
  }
}
