// `npm run bench`: prints every figure beside its floor, as JSON lines.
import { readdirSync } from 'node:fs';
import { join } from 'node:path';
import { spawnSync } from 'node:child_process';
import { build, checkNode, install, root } from './workspace.mjs';

checkNode();
install();
build();
const folder = join(root, 'service', 'bench');
for (const file of readdirSync(folder).filter((name) => name.endsWith('.bench.ts'))) {
  const { status } = spawnSync(
    join(root, 'node_modules', '.bin', 'tsx'),
    [
      '-e',
      `import(${JSON.stringify(join(folder, file))}).then(async (bench) => { for (const record of await bench.default()) console.log(JSON.stringify(record)); })`,
    ],
    { cwd: root, stdio: 'inherit' },
  );
  if (status !== 0) process.exitCode = 1;
}
