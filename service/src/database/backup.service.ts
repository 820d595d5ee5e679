import { Injectable, Logger } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import Sqlite, { type Database } from 'better-sqlite3';
import { existsSync, mkdirSync, readdirSync, renameSync, rmSync, statSync } from 'node:fs';
import { join } from 'node:path';
import { Gauge } from 'prom-client';
import type { DataSource } from 'typeorm';
import type { Settings } from '../settings.js';
import { diskSpace } from './disk.js';

const LOOK_EVERY_MS = 10 * 60_000;
/** A backup is made when the newest is this old, ms. */
const EVERY_MS = 24 * 3_600_000;
/** Days of which the newest backup is kept. */
export const BACKUPS_KEPT = 7;
/** Left to the database while a backup is made, bytes: its log grows meanwhile. */
const SPARE_BYTES = 128 * 2 ** 20;
/** Pages copied before intake has its turn again. */
const PAGES_PER_STEP = 200;

const NAME = /^polewright-(\d{4}-\d\d-\d\d)T(\d\d)-(\d\d)-(\d\d)\.sqlite$/;

const newestBackup = new Gauge({
  name: 'polewright_backup_newest_timestamp_seconds',
  help: 'When the newest backup was begun; 0 without one',
});

export interface Backup {
  at: Date;
  /** Of its file. */
  name: string;
  path: string;
  bytes: number;
}

/** Refused before anything was written: a backup that fills the disk would take the database with it. */
export class NoSpaceForBackup extends Error {
  constructor(
    readonly needed: number,
    readonly free: number,
  ) {
    super(`it needs ${mebibytes(needed)} of disk and ${mebibytes(free)} are free`);
  }
}

const mebibytes = (bytes: number): string => `${Math.ceil(bytes / 2 ** 20)} MiB`;

/** The folder of backups in a data folder. */
export const backupFolder = (dataDir: string): string => join(dataDir, 'backups');

/** The backups in a folder, newest first. */
export function backupsIn(folder: string): Backup[] {
  if (!existsSync(folder)) return [];
  return readdirSync(folder)
    .flatMap((name) => {
      const [, day, hours, minutes, seconds] = NAME.exec(name) ?? [];
      const path = join(folder, name);
      const file = day !== undefined && statSync(path, { throwIfNoEntry: false });
      return file
        ? [{ at: new Date(`${day}T${hours}:${minutes}:${seconds}Z`), name, path, bytes: file.size }]
        : [];
    })
    .sort((a, b) => b.at.getTime() - a.at.getTime());
}

/** A copy says, as its original, that it has a write-ahead log: whoever read it would leave two files beside it. */
function leaveLog(path: string): void {
  const copy = new Sqlite(path);
  copy.pragma('journal_mode = DELETE');
  copy.close();
}

/** Copies the database beside itself once a day while it works, by SQLite's online backup. */
@Injectable()
export class BackupService {
  private readonly log = new Logger(BackupService.name);
  /** Pages of the backup that is being made. */
  private pages: { done: number; total: number } | null = null;
  private failed: { at: Date; why: string } | null = null;

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly config: ConfigService<Settings, true>,
  ) {}

  list(): Backup[] {
    return backupsIn(this.folder);
  }

  /** Share of the backup that is being made, 0 to 1; null while none is. */
  get progress(): number | null {
    return this.pages && this.pages.done / Math.max(1, this.pages.total);
  }

  /** Why the last attempt made no backup; null when it made one. */
  get failure(): { at: Date; why: string } | null {
    return this.failed;
  }

  /** Bytes of disk that a backup needs now: as many as the database has, and what the database needs meanwhile. */
  get needed(): number {
    const { page_count: pages, page_size: size } = this.database
      .prepare('SELECT * FROM pragma_page_count, pragma_page_size')
      .get() as { page_count: number; page_size: number };
    return pages * size + SPARE_BYTES;
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

  /** Whether a backup fits the disk. */
  async requireSpace(): Promise<void> {
    mkdirSync(this.folder, { recursive: true });
    const { free } = await diskSpace(this.folder);
    const { needed } = this;
    if (free < needed) throw new NoSpaceForBackup(needed, free);
  }

  /**
   * Makes a backup.
   *
   * @returns its path; null while another one is being made
   * @throws NoSpaceForBackup, or what SQLite or the file system throws; then no file of that name is there
   */
  async make(now = new Date()): Promise<string | null> {
    if (this.pages) return null;
    this.pages = { done: 0, total: 0 };
    const path = join(
      this.folder,
      `polewright-${now.toISOString().slice(0, 19).replaceAll(':', '-')}.sqlite`,
    );
    const part = `${path}.part`;
    try {
      await this.requireSpace();
      await this.database.backup(part, {
        progress: ({ totalPages: total, remainingPages }) => {
          this.pages = { done: total - remainingPages, total };
          return PAGES_PER_STEP;
        },
      });
      leaveLog(part);
      renameSync(part, path);
      this.failed = null;
    } catch (error) {
      this.failed = { at: now, why: (error as Error).message };
      throw error;
    } finally {
      rmSync(part, { force: true });
      this.pages = null;
    }
    newestBackup.set(now.getTime() / 1000);
    return path;
  }

  /**
   * Deletes all but the newest backup of each of the last `BACKUPS_KEPT` days with one: several on one day, made by
   * hand, do not push out the former days. Called only when the newest was read and found whole.
   */
  prune(): void {
    const days = new Set<string>();
    for (const { at, path } of this.list()) {
      const day = at.toISOString().slice(0, 10);
      if (days.has(day) || days.size === BACKUPS_KEPT) rmSync(path);
      else days.add(day);
    }
  }

  private get database(): Database {
    return (this.dataSource.driver as unknown as { databaseConnection: Database }).databaseConnection;
  }

  private get folder(): string {
    return backupFolder(this.config.get('DATA_DIR', { infer: true }));
  }
}
