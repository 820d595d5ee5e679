import { Injectable } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { InjectDataSource } from '@nestjs/typeorm';
import { statSync } from 'node:fs';
import type { DataSource } from 'typeorm';
import { BACKUPS_KEPT, BackupService } from '../database/backup.service.js';
import { diskSpace } from '../database/disk.js';
import { groupBy } from '../group-by.js';
import type { Settings } from '../settings.js';
import type { ForecastDto, IntegrityDto, StorageDto, TableSizeDto } from './dto/storage.dto.js';
import { fullInDays, grownBytes, rowsPerDay, type Grown } from './growth.js';
import type { IntegrityCheck } from './integrity-check.entity.js';
import { KIND_OF, RETENTION, RETENTION_KINDS, type Retention } from './retention.js';
import { RetentionSettings } from './retention-settings.service.js';
import type { StorageMeasurement } from './storage-measurement.entity.js';
import { DATABASE, StorageService } from './storage.service.js';
import { CAPTURE_FILES } from './work-storage.js';

const DAY = 86_400;

/** What the data folder holds, how it grows, and what there is to fall back on. */
@Injectable()
export class StorageReport {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly config: ConfigService<Settings, true>,
    private readonly storage: StorageService,
    private readonly backups: BackupService,
    private readonly settings: RetentionSettings,
  ) {}

  /** @param mayChangeRetention whether the person who asks may */
  async make(mayChangeRetention: boolean): Promise<StorageDto> {
    const [disk, measurements, checks, reusable] = await Promise.all([
      diskSpace(this.config.get('DATA_DIR', { infer: true })),
      this.storage.measurements(),
      this.storage.checks(),
      this.dataSource.query(
        'SELECT freelist_count * page_size AS "bytes" FROM pragma_freelist_count, pragma_page_size',
      ) as Promise<{ bytes: number }[]>,
    ]);
    const retention = this.settings.get();
    const newest = measurements.at(-1)?.t ?? null;
    const tables = newest === null ? [] : tableSizes(measurements, newest, retention);
    const databaseBytes = ['', '-wal'].reduce((sum, end) => sum + bytesOf(this.storage.database + end), 0);
    const backups = this.backups.list();
    return {
      freeBytes: disk.free,
      totalBytes: disk.total,
      databaseBytes,
      reusableBytes: reusable[0]!.bytes,
      measuredAt: timeOf(newest),
      measuring: this.storage.measuring,
      tables,
      forecast: forecast(tables, newest, timeOf(measurements[0]?.t ?? null), {
        database: databaseBytes,
        backups: backups.reduce((sum, { bytes }) => sum + bytes, 0),
        free: disk.free,
      }),
      retention: RETENTION_KINDS.map((kind) => ({
        kind,
        title: RETENTION[kind].title,
        keptSeconds: retention[kind],
        defaultSeconds: RETENTION[kind].default,
        leastSeconds: RETENTION[kind].least,
        mostSeconds: RETENTION[kind].most,
      })),
      mayChangeRetention,
      backups: {
        items: backups.map(({ name, at, bytes }) => ({
          name,
          at,
          bytes,
          integrity: integrityDto(checks.get(name)),
        })),
        kept: BACKUPS_KEPT,
        neededBytes: this.backups.needed,
        progress: this.backups.progress,
        failure: this.backups.failure,
      },
      integrity: integrityDto(checks.get(DATABASE)),
      checking: this.storage.checking,
    };
  }
}

const timeOf = (t: number | null): Date | null => (t === null ? null : new Date(t * 1000));

const bytesOf = (path: string): number => statSync(path, { throwIfNoEntry: false })?.size ?? 0;

const integrityDto = (check: IntegrityCheck | undefined): IntegrityDto | null =>
  check ? { at: check.at, fault: check.fault } : null;

/** What the newest measurement found, with the growth since the older ones; largest first. */
function tableSizes(
  measurements: StorageMeasurement[],
  newest: number,
  retention: Readonly<Retention>,
): TableSizeDto[] {
  return [...groupBy(measurements, ({ name }) => name).values()]
    .flatMap((rows) => {
      const last = rows.at(-1)!;
      if (last.t !== newest) return []; // a table that is no longer there
      return {
        name: last.name,
        rows: last.rows,
        bytes: last.bytes,
        rowsPerDay: rowsPerDay(rows),
        keptSeconds: last.name in KIND_OF ? retention[KIND_OF[last.name as keyof typeof KIND_OF]] : null,
        oldest: timeOf(last.oldest),
      };
    })
    .sort((a, b) => b.bytes - a.bytes);
}

function forecast(
  tables: TableSizeDto[],
  newest: number | null,
  since: Date | null,
  of: { database: number; backups: number; free: number },
): ForecastDto {
  const grown = tables.map((table) => grownOf(table, newest!));
  if (!grown.some((table) => table.rowsPerDay !== null))
    return { outcome: 'not-enough-history', since, bytesPerDay: null, fullAt: null, fullInDays: null };
  const captures = grown.find(({ name }) => name === CAPTURE_FILES)!;
  const inDatabase = grown.filter((table) => table !== captures);
  // One more than are kept: an old one goes only after the newest was found whole.
  const days = fullInDays(inDatabase, captures, { ...of, backupsKept: BACKUPS_KEPT + 1 });
  return {
    outcome: days === null ? 'not-within-ten-years' : days === 0 ? 'backups-do-not-fit' : 'full-at',
    since,
    bytesPerDay: grownBytes(grown, 1),
    fullAt: days === null || days === 0 ? null : new Date(Date.now() + days * DAY * 1000),
    fullInDays: days || null,
  };
}

const grownOf = (
  { name, rows, bytes, rowsPerDay, keptSeconds, oldest }: TableSizeDto,
  now: number,
): Grown => ({
  name,
  rows,
  bytes,
  rowsPerDay,
  growsForDays:
    keptSeconds === null
      ? Infinity
      : Math.max(0, keptSeconds - (oldest ? now - oldest.getTime() / 1000 : 0)) / DAY,
});
