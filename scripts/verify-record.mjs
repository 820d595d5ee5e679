// `npm run verify-record [database]`: checks the record's hash chain; exit code 0 intact, 1 broken, 2 no record.
import { build, checkNode, install, root } from './workspace.mjs';
import { spawnSync } from 'node:child_process';
import { join } from 'node:path';

checkNode();
install();
build();
const { status } = spawnSync(
  process.execPath,
  [join(root, 'service', 'dist', 'audit', 'verify-record.js'), ...process.argv.slice(2)],
  { stdio: 'inherit' },
);
process.exit(status ?? 2);
