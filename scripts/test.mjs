// `npm test`: everything that CI runs, on a fresh clone as well; ends with one line `N passed, N failed`.
import { spawnSync } from 'node:child_process';
import { existsSync } from 'node:fs';
import { join } from 'node:path';
import { build, checkNode, fail, install, root } from './workspace.mjs';

checkNode();
install();
const bin = (name) => join(root, 'node_modules', '.bin', name);
const run = (command, args) => spawnSync(command, args, { cwd: root, stdio: 'inherit' }).status === 0;

// Lint, format, types and the arrows between modules count as one test each.
let passed = 0;
let failed = 0;
function check(name, ok) {
  console.log(`${ok ? 'passed' : 'FAILED'}: ${name}`);
  if (ok) passed++;
  else failed++;
}

browser();
check('lint', run(bin('eslint'), ['.', '--max-warnings', '0']));
check('format', run(bin('prettier'), ['--check', '--log-level', 'warn', '.']));
build();
check('types of the service', run(bin('tsc'), ['-p', 'service/tsconfig.json']));
check('types of the page', run(bin('tsc'), ['-p', 'ui/tsconfig.json']));
check(
  'arrows between modules',
  run(bin('depcruise'), ['--config', '.dependency-cruiser.mjs', 'service/src', 'simulator/src', 'ui/src']),
);

const { status, stdout } = spawnSync(
  bin('vitest'),
  ['run', '--reporter=default', '--reporter=./scripts/count-reporter.ts', ...process.argv.slice(2)],
  {
    cwd: root,
    stdio: ['inherit', 'pipe', 'inherit'],
    encoding: 'utf8',
    maxBuffer: 1 << 28,
  },
);
const counts = /^(\d+) passed, (\d+) failed(?:, (\d+) skipped)?$/m.exec(stdout);
process.stdout.write(counts ? stdout.replace(counts[0], '') : stdout);
passed += Number(counts?.[1] ?? 0);
failed += Number(counts?.[2] ?? 0) || (status === 0 ? 0 : 1);
const skipped = Number(counts?.[3] ?? 0);
console.log(`${passed} passed, ${failed} failed${skipped > 0 ? `, ${skipped} skipped` : ''}`);
process.exit(failed > 0 ? 1 : 0);

/** Debian's Chromium for the browser tests: installed here when we may, named when we may not. */
function browser() {
  if (existsSync(process.env.CHROMIUM ?? '/usr/bin/chromium')) return;
  const apt = 'apt-get update && apt-get install -y --no-install-recommends chromium';
  if (process.getuid?.() !== 0 || !existsSync('/usr/bin/apt-get'))
    fail(
      `The browser tests need Chromium. Install it (Debian, as root: ${apt}) or set CHROMIUM to its path.`,
    );
  console.log('Installing Chromium for the browser tests …');
  for (let attempt = 0; attempt < 5; attempt++) {
    if (run('bash', ['-c', `DEBIAN_FRONTEND=noninteractive; export DEBIAN_FRONTEND; ${apt}`])) return;
    // Another apt-get may hold the lock.
    spawnSync('sleep', ['15']);
  }
  fail(`Chromium could not be installed. Try: ${apt}`);
}
