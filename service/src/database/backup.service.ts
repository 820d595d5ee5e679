import { Injectable, Logger } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import type { Database } from 'better-sqlite3';
import { existsSync, mkdirSync, readdirSync, renameSync, rmSync } from 'node:fs';
import { join } from 'node:path';
import { Gauge } from 'prom-client';
import type { DataSource } from 'typeorm';
import type { Settings } from '../settings.js';

const LOOK_EVERY_MS = 10 * 60_000;
/** A backup is made when the newest is this old, ms, and the newest ones are kept. */
const EVERY_MS = 24 * 3_600_000;
export const BACKUPS_KEPT = 7;
/** Pages copied before intake has its turn again. */
const PAGES_PER_STEP = 200;

const NAME = /^polewright-(\d{4}-\d\d-\d\d)T(\d\d)-(\d\d)-(\d\d)\.sqlite$/;

const newestBackup = new Gauge({
  name: 'polewright_backup_newest_timestamp_seconds',
  help: 'When the newest backup was begun; 0 without one',
});

export interface Backup {
  at: Date;
  path: string;
}

/** The folder of backups in a data folder. */
export const backupFolder = (dataDir: string): string => join(dataDir, 'backups');

/** The backups in a folder, newest first. */
export function backupsIn(folder: string): Backup[] {
  if (!existsSync(folder)) return [];
  return readdirSync(folder)
    .flatMap((name) => {
      const [, day, hours, minutes, seconds] = NAME.exec(name) ?? [];
      return day === undefined
        ? []
        : [{ at: new Date(`${day}T${hours}:${minutes}:${seconds}Z`), path: join(folder, name) }];
    })
    .sort((a, b) => b.at.getTime() - a.at.getTime());
}

/** Copies the database beside itself once a day while it works, by SQLite's online backup. */
@Injectable()
export class BackupService {
  private readonly log = new Logger(BackupService.name);
  private running = false;

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly config: ConfigService<Settings, true>,
  ) {}

  list(): Backup[] {
    return backupsIn(this.folder);
  }

  @Interval(LOOK_EVERY_MS)
  async whenDue(now = new Date()): Promise<void> {
    const [newest] = this.list();
    newestBackup.set(newest ? newest.at.getTime() / 1000 : 0);
    if (newest && now.getTime() - newest.at.getTime() < EVERY_MS) return;
    try {
      await this.make(now);
    } catch (error) {
      this.log.error(`The backup failed: ${(error as Error).message}`);
    }
  }

  /**
   * Makes a backup and deletes all but the newest `BACKUPS_KEPT`.
   *
   * @returns its path; null while another one is being made
   * @throws what SQLite or the file system throws; then no file of that name is there
   */
  async make(now = new Date()): Promise<string | null> {
    if (this.running) return null;
    this.running = true;
    const path = join(
      this.folder,
      `polewright-${now.toISOString().slice(0, 19).replaceAll(':', '-')}.sqlite`,
    );
    const part = `${path}.part`;
    try {
      mkdirSync(this.folder, { recursive: true });
      const { databaseConnection } = this.dataSource.driver as unknown as { databaseConnection: Database };
      await databaseConnection.backup(part, { progress: () => PAGES_PER_STEP });
      renameSync(part, path);
    } finally {
      rmSync(part, { force: true });
      this.running = false;
    }
    newestBackup.set(now.getTime() / 1000);
    for (const { path: old } of this.list().slice(BACKUPS_KEPT)) rmSync(old);
    return path;
  }

  private get folder(): string {
    return backupFolder(this.config.get('DATA_DIR', { infer: true }));
  }
}
