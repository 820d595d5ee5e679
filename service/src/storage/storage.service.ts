import { ConflictException, Injectable, Logger, NotFoundException } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import { statSync } from 'node:fs';
import { LessThan, MoreThanOrEqual, type DataSource } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { captureFolder } from '../captures/capture-files.js';
import { BackupService, NoSpaceForBackup } from '../database/backup.service.js';
import { Transactions } from '../database/transactions.js';
import type { Settings } from '../settings.js';
import { GROWTH_REACH } from './growth.js';
import { IntegrityCheck } from './integrity-check.entity.js';
import { StorageMeasurement } from './storage-measurement.entity.js';
import { StorageThread } from './storage-thread.service.js';

/** The subject of an integrity check that is no backup. */
export const DATABASE = 'database';

const LOOK_EVERY_MS = 60_000;
/** The tables are measured when the newest measurement is this old, s. */
const MEASURE_EVERY = 6 * 3_600;
/** Measurements are kept twice as long as growth looks back, s. */
const MEASUREMENTS_KEPT = 2 * GROWTH_REACH;

/** Measures the tables, checks the files, and makes backups on demand; all of it beside the intake. */
@Injectable()
export class StorageService {
  private readonly log = new Logger(StorageService.name);
  private readonly underCheck = new Set<string>();
  private measurement: Promise<void> | null = null;

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly config: ConfigService<Settings, true>,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
    private readonly backups: BackupService,
    private readonly thread: StorageThread,
  ) {}

  /** What is being checked now or waits for it. */
  get checking(): string[] {
    return [...this.underCheck];
  }

  get measuring(): boolean {
    return this.measurement !== null;
  }

  /** Measurements that growth looks back at, oldest first. */
  measurements(): Promise<StorageMeasurement[]> {
    const now = Math.floor(Date.now() / 1000);
    return this.dataSource
      .getRepository(StorageMeasurement)
      .find({ where: { t: MoreThanOrEqual(now - MEASUREMENTS_KEPT) }, order: { t: 'ASC' } });
  }

  /** Integrity checks whose file is still the one that was checked, by subject. */
  async checks(): Promise<Map<string, IntegrityCheck>> {
    const bytes = new Map(this.backups.list().map((backup) => [backup.name, backup.bytes]));
    const rows = await this.dataSource.getRepository(IntegrityCheck).find();
    return new Map(
      rows
        .filter((row) => row.subject === DATABASE || bytes.get(row.subject) === row.bytes)
        .map((row) => [row.subject, row]),
    );
  }

  /** Measures when it is time, checks a backup that was not checked yet, and lets old ones go after a whole newest. */
  @Interval(LOOK_EVERY_MS)
  async look(): Promise<void> {
    try {
      const measured = await this.measurements();
      if (Date.now() / 1000 - (measured.at(-1)?.t ?? 0) >= MEASURE_EVERY) await this.measure();
      const checks = await this.checks();
      const backups = this.backups.list();
      const unchecked = backups.find(({ name }) => !checks.has(name));
      if (unchecked) await this.check(unchecked.name);
      else if (backups[0] && checks.get(backups[0].name)!.fault === null) this.backups.prune();
    } catch (error) {
      this.log.warn(`Storage could not be looked after: ${(error as Error).message}`);
    }
  }

  /** Measures every table now; who asks meanwhile waits for the same. */
  measure(): Promise<void> {
    this.measurement ??= this.measureNow().finally(() => (this.measurement = null));
    return this.measurement;
  }

  private async measureNow(): Promise<void> {
    const captures = captureFolder(this.config.get('DATA_DIR', { infer: true }));
    const sizes = await this.thread.sizes(this.database, captures);
    const t = Math.floor(Date.now() / 1000);
    await this.transactions.run(async (manager) => {
      await manager.upsert(
        StorageMeasurement,
        sizes.map((size) => ({ t, ...size })),
        ['t', 'name'],
      );
      await manager.delete(StorageMeasurement, { t: LessThan(t - MEASUREMENTS_KEPT) });
    });
  }

  /**
   * Reads every page of the database or of a backup, and keeps what that said.
   *
   * @throws NotFoundException when there is no such backup
   */
  async check(subject: string): Promise<void> {
    const path = this.pathOf(subject);
    if (this.underCheck.has(subject)) return;
    this.underCheck.add(subject);
    try {
      const bytes = statSync(path).size;
      const fault = await this.thread.faultOf(path);
      if (fault !== null) this.log.error(`The integrity check of ${path} failed: ${fault}`);
      await this.transactions.run(async (manager) => {
        await manager.save(IntegrityCheck, { subject, bytes, at: new Date(), fault });
        const kept = new Set([DATABASE, ...this.backups.list().map(({ name }) => name)]);
        for (const row of await manager.find(IntegrityCheck))
          if (!kept.has(row.subject)) await manager.remove(row);
      });
    } finally {
      this.underCheck.delete(subject);
    }
  }

  /** Begins a check that somebody asked for; its outcome is kept. */
  beginCheck(subject: string): void {
    this.pathOf(subject);
    this.check(subject).catch((error: Error) =>
      this.log.error(`The integrity check of ${subject} failed: ${error.message}`),
    );
  }

  /** Begins to measure because somebody asked for it. */
  beginMeasuring(): void {
    this.measure().catch((error: Error) => this.log.error(`The tables were not measured: ${error.message}`));
  }

  /**
   * Begins a backup because a person asked for it, and records that.
   *
   * @throws ConflictException when one is being made, or when it does not fit the disk
   */
  async beginBackup(user: SignedInUser): Promise<void> {
    if (this.backups.progress !== null) throw new ConflictException('A backup is being made already');
    try {
      await this.backups.requireSpace();
    } catch (error) {
      if (!(error instanceof NoSpaceForBackup)) throw error;
      throw new ConflictException(`No backup was begun: ${error.message}. Make room, then try again.`);
    }
    await this.transactions.run((manager) =>
      this.audit.record(manager, {
        user,
        action: 'storage.backup-begun',
        subject: { type: 'storage', id: 'backup' },
      }),
    );
    this.backups
      .make()
      .then(() => this.look())
      .catch((error: Error) => this.log.error(`The backup failed: ${error.message}`));
  }

  /** Path of the database file. */
  get database(): string {
    return this.config.get('DATABASE', { infer: true });
  }

  private pathOf(subject: string): string {
    if (subject === DATABASE) return this.database;
    const backup = this.backups.list().find(({ name }) => name === subject);
    if (!backup) throw new NotFoundException(`There is no backup ${subject}`);
    return backup.path;
  }
}
