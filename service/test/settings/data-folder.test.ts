import { mkdirSync, readdirSync, rmSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { afterEach, beforeEach, expect, test } from 'vitest';
import { readSettings, SettingsError } from '../../src/settings.js';
import { temporaryFolder } from '../support/start-service.js';

let folder: string;
beforeEach(() => {
  folder = temporaryFolder();
});
afterEach(() => rmSync(folder, { recursive: true, force: true }));

test.runIf(process.platform === 'linux').each(['/proc/polewright/data', '/proc', '/dev/null/data'])(
  'a data folder at %s is refused at once and by name',
  (path) => {
    expect(() => readSettings({ DATA_DIR: path })).toThrow(SettingsError);
    expect(() => readSettings({ DATA_DIR: path })).toThrow(`The data folder ${path} cannot be written`);
  },
);

test('a file in the place of the data folder is refused and left alone', () => {
  const path = join(folder, 'data');
  writeFileSync(path, 'kept');
  expect(() => readSettings({ DATA_DIR: path })).toThrow(SettingsError);
  expect(readdirSync(folder)).toEqual(['data']);
});

test('a data folder is made with what is missing above it, and nothing but the secret is left in it', () => {
  const path = join(folder, 'a', 'b');
  expect(readSettings({ DATA_DIR: path }).DATA_DIR).toBe(path);
  expect(readdirSync(path)).toEqual(['secret']);
  mkdirSync(join(path, 'captures'));
  readSettings({ DATA_DIR: path });
  expect(readdirSync(path)).toEqual(['captures', 'secret']);
});
