import { Injectable } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import type { DataSource, EntityManager } from 'typeorm';

/**
 * Runs units of work one after another. SQLite has one connection here, so two open transactions would be one: the
 * queue keeps them apart. A unit of work only talks to the database: no network, no hashing, no timers inside.
 */
@Injectable()
export class Transactions {
  private tail: Promise<unknown> = Promise.resolve();

  constructor(@InjectDataSource() private readonly dataSource: DataSource) {}

  /** Commits what `work` did, or rolls all of it back when it throws. */
  run<T>(work: (manager: EntityManager) => Promise<T>): Promise<T> {
    const result = this.tail.then(() => this.dataSource.transaction(work));
    this.tail = result.catch(() => undefined);
    return result;
  }
}
