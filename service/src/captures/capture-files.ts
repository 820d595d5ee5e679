import { Injectable } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { mkdirSync, rmSync } from 'node:fs';
import { rm } from 'node:fs/promises';
import { join } from 'node:path';
import type { Settings } from '../settings.js';

/** The folder of captures in a data folder. */
export const captureFolder = (dataDir: string): string => join(dataDir, 'captures');

/** Where captures lie: named by their id alone, whatever the file was called. */
@Injectable()
export class CaptureFiles {
  private readonly folder: string;
  /** Uploads that are still coming in; emptied at each start. */
  readonly incoming: string;

  constructor(config: ConfigService<Settings, true>) {
    this.folder = captureFolder(config.get('DATA_DIR', { infer: true }));
    this.incoming = join(this.folder, 'incoming');
    rmSync(this.incoming, { recursive: true, force: true });
    mkdirSync(this.incoming, { recursive: true });
  }

  source(id: number): string {
    return join(this.folder, `${id}.samples`);
  }

  trace(id: number): string {
    return join(this.folder, `${id}.trace`);
  }

  async remove(id: number): Promise<void> {
    await Promise.all([this.source(id), this.trace(id)].map((path) => rm(path, { force: true })));
  }
}
