import { Injectable } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import type { Database } from 'better-sqlite3';
import type { DataSource, EntitySubscriberInterface } from 'typeorm';
import { Axis } from '../fleet/axis.entity.js';

/** What is read with an axis. */
const TABLES = ['axis', 'machine', 'site'];

/**
 * All axes with their machines and sites, read again only after one was written: who looks at every axis at every beat would
 * otherwise build a thousand entities a second. Take them as they are, do not change them.
 *
 * The database itself tells of every write on its connection, by triggers that last as long as the connection does:
 * TypeORM's subscribers know neither the ids of an `update()` nor a statement written by hand.
 */
@Injectable()
export class AxesAtHand implements EntitySubscriberInterface<Axis> {
  private axes: Promise<readonly Axis[]> | null = null;

  constructor(@InjectDataSource() private readonly dataSource: DataSource) {
    const { databaseConnection } = dataSource.driver as unknown as { databaseConnection: Database };
    databaseConnection.function('axes_written', () => {
      this.forget();
      return null;
    });
    for (const table of TABLES)
      for (const change of ['INSERT', 'UPDATE', 'DELETE'])
        databaseConnection.exec(
          `CREATE TEMP TRIGGER IF NOT EXISTS "${table}_${change}" AFTER ${change} ON main."${table}"
           BEGIN SELECT axes_written(); END`,
        );
    dataSource.subscribers.push(this);
  }

  all(): Promise<readonly Axis[]> {
    if (!this.axes) {
      const reading = this.dataSource.getRepository(Axis).find({ relations: { machine: true, site: true } });
      this.axes = reading;
      reading.catch(() => this.axes === reading && this.forget());
    }
    return this.axes;
  }

  /** What was read on the one connection inside a transaction that was taken back is no longer so. */
  afterTransactionRollback(): void {
    this.forget();
  }

  private forget(): void {
    this.axes = null;
  }
}
