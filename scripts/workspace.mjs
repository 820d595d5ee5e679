// What the commands at the root share: where things are, whether they are installed and built, clear words when not.
import { execFileSync, spawnSync } from 'node:child_process';
import { createHash } from 'node:crypto';
import { existsSync, mkdirSync, readdirSync, readFileSync, statSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';

export const root = fileURLToPath(new URL('..', import.meta.url));

export function fail(message) {
  console.error(`\n${message}\n`);
  process.exit(1);
}

/** Node 20.19 or later within 20: better-sqlite3 12 and Vite 8 are proven on it. */
export function checkNode() {
  const [major, minor] = process.versions.node.split('.').map(Number);
  if (major < 20 || (major === 20 && minor < 19))
    fail(
      `Polewright needs Node 20.19 or later; this is ${process.versions.node}. Debian 12: install Node 20 from its maker's packages.`,
    );
}

/** Installs from the lock file where that has not been done, or was done for another lock file. */
export function install() {
  const stamp = join(root, 'node_modules', '.polewright-lock');
  const lock = createHash('sha256')
    .update(readFileSync(join(root, 'package-lock.json')))
    .digest('hex');
  if (existsSync(stamp) && readFileSync(stamp, 'utf8') === lock) return;
  console.log('Installing from the lock file; this takes a minute or two the first time …');
  const { status } = spawnSync('npm', ['ci', '--no-audit', '--no-fund'], { cwd: root, stdio: 'inherit' });
  if (status !== 0)
    fail(
      'npm ci failed; its words are above. It needs the npm registry, and python3, make and g++ where no ready-made better-sqlite3 can be fetched (Debian: apt-get install -y python3 make g++).',
    );
  writeFileSync(stamp, lock);
}

/** Newest change below a folder, ms. */
function newest(folder) {
  let latest = 0;
  for (const entry of readdirSync(folder, { withFileTypes: true })) {
    if (entry.name === 'node_modules' || entry.name === 'dist') continue;
    const path = join(folder, entry.name);
    latest = Math.max(latest, entry.isDirectory() ? newest(path) : statSync(path).mtimeMs);
  }
  return latest;
}

/** Builds the parts whose sources are newer than what was built from them. */
export function build({ force = false } = {}) {
  const parts = [
    { name: 'service', made: 'service/dist/main.js', run: ['tsc', '-p', 'service/tsconfig.build.json'] },
    { name: 'simulator', made: 'simulator/dist/main.js', run: ['tsc', '-p', 'simulator/tsconfig.json'] },
    { name: 'ui', made: 'ui/dist/index.html', run: ['vite', 'build', 'ui', '--logLevel', 'warn'] },
  ];
  for (const { name, made, run } of parts) {
    const stamp = join(root, name, 'dist', '.built');
    const fresh =
      existsSync(join(root, made)) && existsSync(stamp) && statSync(stamp).mtimeMs > newest(join(root, name));
    if (fresh && !force) continue;
    console.log(`Building ${name} …`);
    try {
      execFileSync(join(root, 'node_modules', '.bin', run[0]), run.slice(1), { cwd: root, stdio: 'inherit' });
    } catch {
      fail(`${name} could not be built; the words above say why.`);
    }
    mkdirSync(join(root, name, 'dist'), { recursive: true });
    writeFileSync(stamp, '');
  }
}
