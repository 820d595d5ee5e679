import { Injectable, Logger, type OnApplicationBootstrap, type OnApplicationShutdown } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import { rm } from 'node:fs/promises';
import { Worker } from 'node:worker_threads';
import type { DataSource } from 'typeorm';
import { CaptureFiles } from './capture-files.js';
import { Capture } from './capture.entity.js';
import type { CaptureAnswer, CaptureJob } from './work-capture.js';

/** The compiled thread; a service that runs from its sources (tests) uses the one that was built. */
const WORKER = new URL(
  import.meta.url.endsWith('.ts') ? '../../dist/captures/capture-worker.js' : './capture-worker.js',
  import.meta.url,
);

/** Works out queued captures one after another. The queue is the table: what a restart interrupts is worked out anew. */
@Injectable()
export class CaptureQueue implements OnApplicationBootstrap, OnApplicationShutdown {
  private readonly log = new Logger(CaptureQueue.name);
  private running: { id: number; worker: Worker } | null = null;
  private busy = false;
  private stopped = false;

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly files: CaptureFiles,
  ) {}

  async onApplicationBootstrap(): Promise<void> {
    const captures = this.dataSource.getRepository(Capture);
    await captures.update({ status: 'running' }, { status: 'queued' });
    await captures.update(
      { status: 'queued', recorded: false },
      {
        status: 'failed',
        problem: 'The service was restarted while this was being recorded; take it again.',
      },
    );
    this.look();
  }

  async onApplicationShutdown(): Promise<void> {
    this.stopped = true;
    await this.running?.worker.terminate();
  }

  /** Something was queued. */
  look(): void {
    if (this.busy || this.stopped) return;
    this.busy = true;
    void this.workOff()
      .catch((error: Error) => this.log.error('The queue of captures stopped', error.stack))
      .finally(() => (this.busy = false));
  }

  /** Ends the work on a capture, if it is the one being worked on. */
  async end(id: number): Promise<void> {
    if (this.running?.id === id) await this.running.worker.terminate();
  }

  private async workOff(): Promise<void> {
    const captures = this.dataSource.getRepository(Capture);
    for (;;) {
      const next = await captures.findOne({
        where: { status: 'queued', recorded: true },
        order: { id: 'ASC' },
      });
      if (!next || this.stopped) return;
      const { id, mapping } = next;
      await captures.update({ id, status: 'queued' }, { status: 'running' });
      const answer = await this.work(id, {
        source: this.files.source(id),
        mapping,
        trace: this.files.trace(id),
      });
      if (this.stopped) return;
      // A capture that was cancelled or removed meanwhile stays as it is.
      if ('done' in answer) {
        const { affected } = await captures.update(
          { id, status: 'running' },
          { status: 'done', ...answer.done },
        );
        if (affected) await rm(this.files.source(id), { force: true });
        else await this.files.remove(id);
      } else {
        await captures.update({ id, status: 'running' }, { status: 'failed', problem: answer.problem });
        await this.files.remove(id);
      }
    }
  }

  private work(id: number, job: CaptureJob): Promise<CaptureAnswer> {
    return new Promise((resolve) => {
      const worker = new Worker(WORKER, { workerData: job });
      this.running = { id, worker };
      const end = (answer: CaptureAnswer): void => {
        this.running = null;
        resolve(answer);
      };
      worker.once('message', end);
      worker.once('error', (error) => {
        this.log.error(`Capture ${id} could not be worked out`, error.stack);
        end({ problem: `It could not be worked out: ${error.message}` });
      });
      worker.once('exit', () => end({ problem: 'It was cancelled.' }));
    });
  }
}
