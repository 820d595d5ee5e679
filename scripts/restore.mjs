// `npm run restore -- <backup>`: puts a backup in the database's place; exit code 0 restored, 1 refused.
import { build, checkNode, install, root } from './workspace.mjs';
import { spawnSync } from 'node:child_process';
import { join } from 'node:path';

checkNode();
install();
build();
const { status } = spawnSync(
  process.execPath,
  [join(root, 'service', 'dist', 'database', 'restore.js'), ...process.argv.slice(2)],
  { stdio: 'inherit' },
);
process.exit(status ?? 1);
