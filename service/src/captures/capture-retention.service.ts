import { Injectable, Logger } from '@nestjs/common';
import { Interval } from '@nestjs/schedule';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, type DataSource } from 'typeorm';
import { Alert } from '../alerts/alert.entity.js';
import { Transactions } from '../database/transactions.js';
import { RetentionSettings } from '../storage/retention-settings.service.js';
import { CaptureFiles } from './capture-files.js';
import { Capture } from './capture.entity.js';

const LOOK_EVERY_MS = 60_000;
/** Captures that go at one look, so that nothing waits for it. */
const PER_LOOK = 50;
/** Captures around alerts that are kept of an axis. */
const KEPT_PER_AXIS = 20;

/**
 * Captures around alerts go by themselves: those of an alert that is over when its end is as long ago as the
 * administrator lets them be kept, and of an axis all but the newest `KEPT_PER_AXIS`. As long as its alert is not over
 * a capture's time does not run. What a person uploaded or recorded stays until a person takes it away.
 */
@Injectable()
export class CaptureRetention {
  private readonly log = new Logger(CaptureRetention.name);

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly settings: RetentionSettings,
    private readonly files: CaptureFiles,
  ) {}

  @Interval(LOOK_EVERY_MS)
  async look(now = new Date()): Promise<void> {
    try {
      await this.removeOld(new Date(now.getTime() - 1000 * this.settings.get().alertCaptures));
    } catch (error) {
      this.log.warn(`Old captures could not be deleted: ${(error as Error).message}`);
    }
  }

  /** Called when an axis has got one more capture around an alert. */
  async oneMore(axisId: number): Promise<void> {
    const surplus = await this.dataSource.getRepository(Capture).find({
      select: { id: true },
      where: { axisId, source: 'alert' },
      order: { id: 'DESC' },
      skip: KEPT_PER_AXIS,
      take: 2 * PER_LOOK,
    });
    await this.remove(surplus);
  }

  private async removeOld(before: Date): Promise<void> {
    const old = await this.dataSource
      .getRepository(Capture)
      .createQueryBuilder('capture')
      .select('capture.id')
      .leftJoin(Alert, 'alert', 'alert.id = capture.alertId')
      .where(`capture.source = 'alert' AND capture.status IN ('done', 'failed')`)
      .andWhere(`(alert.id IS NULL OR alert.state = 'normal')`)
      .andWhere('COALESCE(alert.returnedAt, capture.createdAt) < :before', { before })
      .orderBy('capture.id')
      .limit(PER_LOOK)
      .getMany();
    await this.remove(old);
  }

  private async remove(captures: Capture[]): Promise<void> {
    if (captures.length === 0) return;
    const ids = captures.map(({ id }) => id);
    await this.transactions.run((manager) => manager.delete(Capture, { id: In(ids) }));
    for (const id of ids) await this.files.remove(id);
  }
}
