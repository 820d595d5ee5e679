// Writes ui/src/api/schema.d.ts from the service's own OpenAPI document. Run it after changing a DTO or a controller.
import { execFileSync } from 'node:child_process';
import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';

const root = fileURLToPath(new URL('..', import.meta.url));
const run = (file, ...args) => execFileSync(file, args, { cwd: root, stdio: 'inherit' });
const folder = mkdtempSync(join(tmpdir(), 'polewright-schema-'));
try {
  const document = join(folder, 'openapi.json');
  run('npx', 'tsc', '-p', 'service/tsconfig.build.json');
  run(process.execPath, 'service/dist/openapi.js', document);
  const out = process.argv[2] ?? 'ui/src/api/schema.d.ts';
  // A field with a default may be left out of a request.
  run('npx', 'openapi-typescript', document, '--default-non-nullable', 'false', '-o', out);
} finally {
  rmSync(folder, { recursive: true });
}
