import { Injectable, type OnApplicationShutdown } from '@nestjs/common';
import { Worker } from 'node:worker_threads';
import type { StorageAnswer, StorageJob, TableSize } from './work-storage.js';

/** The compiled thread; a service that runs from its sources (tests) uses the one that was built. */
const WORKER = new URL(
  import.meta.url.endsWith('.ts') ? '../../dist/storage/storage-worker.js' : './storage-worker.js',
  import.meta.url,
);

/** Reads whole files beside the service, one after another. */
@Injectable()
export class StorageThread implements OnApplicationShutdown {
  private tail: Promise<unknown> = Promise.resolve();
  private worker: Worker | null = null;
  private stopped = false;

  async onApplicationShutdown(): Promise<void> {
    this.stopped = true;
    await this.worker?.terminate();
  }

  /** Rows and bytes of every table of a database and of a folder of captures. */
  async sizes(database: string, captures: string): Promise<TableSize[]> {
    return ((await this.run({ measure: { database, captures } })) as { sizes: TableSize[] }).sizes;
  }

  /** What is wrong with a database file, in plain words; null when it is whole. */
  async faultOf(path: string): Promise<string | null> {
    return ((await this.run({ check: path })) as { fault: string | null }).fault;
  }

  private run(job: StorageJob): Promise<StorageAnswer> {
    const answer = this.tail.then(() => this.work(job));
    this.tail = answer.catch(() => undefined);
    return answer;
  }

  private work(job: StorageJob): Promise<StorageAnswer> {
    return new Promise((resolve, reject) => {
      if (this.stopped) return reject(new Error('the service is ending'));
      const worker = new Worker(WORKER, { workerData: job });
      this.worker = worker;
      worker.once('message', resolve);
      worker.once('error', reject);
      worker.once('exit', () => reject(new Error('it was ended')));
    });
  }
}
