import { NestFactory } from '@nestjs/core';
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { AppModule } from './app.module.js';
import { readSettings } from './settings.js';
import { setup } from './setup.js';

// Writes the OpenAPI document to the file named on the command line, for the page's generated client.
const target = process.argv[2];
if (!target) throw new Error('Name the file to write');
const folder = mkdtempSync(join(tmpdir(), 'polewright-openapi-'));
const app = await NestFactory.create(AppModule.with(readSettings({ DATA_DIR: folder, DEMO: '0' })), {
  logger: ['error'],
});
writeFileSync(target, JSON.stringify(setup(app)));
await app.close();
rmSync(folder, { recursive: true });
