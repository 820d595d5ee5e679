import { ConflictException, Injectable, Logger } from '@nestjs/common';
import { OnEvent } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { rename, writeFile } from 'node:fs/promises';
import type { DataSource } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import type { Events } from '../events.js';
import { Axis } from '../fleet/axis.entity.js';
import { AxesService } from '../fleet/axes.service.js';
import { SampleRecorder, type KeptBlock } from '../telemetry/sample-recorder.js';
import { CaptureFiles } from './capture-files.js';
import { CaptureQueue } from './capture-queue.service.js';
import { CaptureRetention } from './capture-retention.service.js';
import { Capture, newCapture } from './capture.entity.js';
import { recordedFile } from './recorded-samples.js';

/** Kept around an alert, s. */
const BEFORE_ALERT = 10;
const AFTER_ALERT = 20;
/** How long samples may be late before a recording ends with what it has, s. */
const PATIENCE = 15;

/** Captures of the live stream: on demand, and by itself around an alert. */
@Injectable()
export class LiveCaptures {
  private readonly log = new Logger(LiveCaptures.name);

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
    private readonly axes: AxesService,
    private readonly recorder: SampleRecorder,
    private readonly files: CaptureFiles,
    private readonly queue: CaptureQueue,
    private readonly retention: CaptureRetention,
  ) {}

  /** Starts to record an axis for some seconds from now. */
  async onDemand(axisId: number, seconds: number, user: SignedInUser): Promise<Capture> {
    const axis = await this.axes.get(axisId, user, 'capture.take');
    if (axis.state === 'no-signal')
      throw new ConflictException(`${axis.tag} sends no samples: there is nothing to record`);
    const capture = await this.start(axis, 'on demand', user, null);
    void this.finish(capture, axis, this.recorder.record(axisId, 0, seconds, seconds + PATIENCE));
    return capture;
  }

  @OnEvent('alert.raised', { suppressErrors: false })
  async alertRaised({ alertId, axisId }: Events['alert.raised']): Promise<void> {
    const axis = await this.dataSource.getRepository(Axis).findOneBy({ id: axisId });
    if (!axis) return;
    const blocks = this.recorder.record(axisId, BEFORE_ALERT, AFTER_ALERT, AFTER_ALERT + PATIENCE);
    const capture = await this.start(axis, 'alert', null, alertId);
    void this.finish(capture, axis, blocks);
  }

  private start(
    axis: Axis,
    source: 'on demand' | 'alert',
    user: SignedInUser | null,
    alertId: number | null,
  ): Promise<Capture> {
    return this.transactions.run(async (manager) => {
      const capture = await manager.save(
        Capture,
        newCapture({
          siteId: axis.siteId,
          axisId: axis.id,
          source,
          alertId,
          createdById: user?.id ?? null,
          fileName: alertId === null ? axis.tag : `${axis.tag}, around alert ${alertId}`,
          mapping: null,
        }),
      );
      if (user)
        await this.audit.record(manager, {
          user,
          action: 'capture.recorded',
          subject: { type: 'capture', id: capture.id },
          siteId: axis.siteId,
          note: axis.tag,
        });
      return capture;
    });
  }

  private async finish(capture: Capture, axis: Axis, recording: Promise<KeptBlock[]>): Promise<void> {
    const captures = this.dataSource.getRepository(Capture);
    try {
      const blocks = await recording;
      if (blocks.length === 0) {
        await captures.update(
          { id: capture.id, status: 'queued' },
          { status: 'failed', problem: 'No samples came in while it was being recorded.' },
        );
        return;
      }
      const path = this.files.source(capture.id);
      await writeFile(`${path}.part`, recordedFile(axis.resolution, blocks));
      await rename(`${path}.part`, path);
      const { affected } = await captures.update({ id: capture.id, status: 'queued' }, { recorded: true });
      if (!affected) return void (await this.files.remove(capture.id));
      if (capture.alertId !== null) await this.retention.oneMore(axis.id);
      this.queue.look();
    } catch (error) {
      // At an orderly end the database may be closed already; the next start says so on the capture.
      this.log.warn(`Capture ${capture.id} was not recorded: ${(error as Error).message}`);
    }
  }
}
