import { BadRequestException, ConflictException, Injectable, NotFoundException } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import { rename, rm } from 'node:fs/promises';
import { In, LessThan, type DataSource } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { mayDo } from '../auth/policy.js';
import { requireRole, sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import type { Axis } from '../fleet/axis.entity.js';
import { AxesService } from '../fleet/axes.service.js';
import { CaptureFiles } from './capture-files.js';
import { CaptureQueue } from './capture-queue.service.js';
import { Capture, newCapture, type CaptureMapping } from './capture.entity.js';
import { mappedColumns, readHead } from './csv-record.js';
import { CaptureProblem } from './sample-grid.js';
import { readTrace, type CaptureTrace } from './trace-file.js';

const RELATIONS = { axis: true, site: true, createdBy: true } as const;

/** Captures: uploaded or recorded, worked out, looked at, and taken as a baseline. */
@Injectable()
export class CapturesService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
    private readonly axes: AxesService,
    private readonly files: CaptureFiles,
    private readonly queue: CaptureQueue,
  ) {}

  /**
   * Takes an uploaded file over; on refusal nothing of it stays.
   *
   * @param uploaded where the upload lies
   */
  async upload(
    user: SignedInUser,
    uploaded: string,
    fileName: string,
    mapping: CaptureMapping,
    to: { axisId?: number; siteId?: number },
  ): Promise<Capture> {
    try {
      const axis = to.axisId === undefined ? null : await this.axes.get(to.axisId, user, 'capture.take');
      const siteId = axis?.siteId ?? this.siteFor(user, to.siteId);
      mappedColumns(await readHead(uploaded), mapping);
      const capture = await this.transactions.run(async (manager) => {
        const saved = await manager.save(
          Capture,
          newCapture({
            siteId,
            axisId: axis?.id ?? null,
            source: 'upload',
            alertId: null,
            createdById: user.id,
            fileName: shownName(fileName),
            mapping,
          }),
        );
        await this.audit.record(manager, {
          user,
          action: 'capture.uploaded',
          subject: { type: 'capture', id: saved.id },
          siteId,
          note: saved.fileName,
        });
        return saved;
      });
      await rename(uploaded, this.files.source(capture.id));
      await this.dataSource.getRepository(Capture).update(capture.id, { recorded: true });
      this.queue.look();
      return capture;
    } catch (error) {
      await rm(uploaded, { force: true });
      if (error instanceof CaptureProblem)
        throw new BadRequestException({ errors: [{ path: error.path, message: error.message }] });
      throw error;
    }
  }

  async get(id: number, user: SignedInUser, action: 'see' | 'capture.take' = 'see'): Promise<Capture> {
    const capture = await this.dataSource
      .getRepository(Capture)
      .findOne({ where: { id }, relations: RELATIONS });
    if (!capture) throw new NotFoundException(`There is no capture ${id}`);
    requireRole(user, capture.siteId, action, `capture ${id}`);
    return capture;
  }

  /** Newest first, one more than asked for. */
  list(
    user: SignedInUser,
    { axisId, limit, before }: { axisId?: number; limit: number; before?: number },
  ): Promise<Capture[]> {
    return this.dataSource.getRepository(Capture).find({
      where: {
        siteId: In(sitesOf(user)),
        ...(axisId !== undefined && { axisId }),
        ...(before !== undefined && { id: LessThan(before) }),
      },
      relations: RELATIONS,
      order: { id: 'DESC' },
      take: limit + 1,
    });
  }

  async trace(id: number, user: SignedInUser): Promise<CaptureTrace> {
    const capture = await this.get(id, user);
    if (capture.status !== 'done')
      throw new ConflictException(`Capture ${id} is ${capture.status}: it has no trace`);
    return readTrace(this.files.trace(id));
  }

  /** Ends a capture that is waiting or being worked out. */
  async cancel(id: number, user: SignedInUser): Promise<Capture> {
    const capture = await this.get(id, user, 'capture.take');
    if (capture.status !== 'queued' && capture.status !== 'running')
      throw new ConflictException(`Capture ${id} is ${capture.status}: there is nothing to cancel`);
    await this.transactions.run(async (manager) => {
      const cancelled = { status: 'failed' as const, problem: `Cancelled by ${user.name}.` };
      await manager.update(Capture, { id, status: In(['queued', 'running']) }, cancelled);
      await this.audit.record(manager, {
        user,
        action: 'capture.cancelled',
        subject: { type: 'capture', id },
        siteId: capture.siteId,
      });
    });
    await this.queue.end(id);
    await this.files.remove(id);
    return this.get(id, user);
  }

  async remove(id: number, user: SignedInUser): Promise<void> {
    const capture = await this.get(id, user, 'capture.take');
    await this.transactions.run(async (manager) => {
      await manager.delete(Capture, id);
      await this.audit.record(manager, {
        user,
        action: 'capture.removed',
        subject: { type: 'capture', id },
        siteId: capture.siteId,
        note: capture.fileName,
      });
    });
    await this.queue.end(id);
    await this.files.remove(id);
  }

  /** Takes what a capture says as the baseline of its axis, or of the axis given. */
  async takeAsBaseline(id: number, user: SignedInUser, axisId?: number): Promise<Axis> {
    const capture = await this.get(id, user);
    const chosen = capture.axisId ?? axisId;
    if (chosen === undefined)
      throw new BadRequestException({
        errors: [{ path: 'axisId', message: 'is needed: the capture names no axis' }],
      });
    if (capture.axisId !== null && axisId !== undefined && axisId !== capture.axisId)
      throw new ConflictException(`Capture ${id} was taken from another axis`);
    const axis = await this.axes.get(chosen, user, 'axis.baseline');
    if (axis.siteId !== capture.siteId) throw new ConflictException(`Capture ${id} belongs to another site`);
    const estimate = capture.result?.estimate;
    if (!estimate || capture.result?.verdict !== 'usable')
      throw new ConflictException(
        `Capture ${id} is not usable as a baseline${capture.result ? `: ${capture.result.remarks.join('; ')}` : ''}`,
      );
    return this.axes.takeBaseline(axis, estimate, user, `capture ${id}, ${capture.fileName}`);
  }

  private siteFor(user: SignedInUser, siteId?: number): number {
    if (siteId !== undefined) {
      requireRole(user, siteId, 'capture.take', `site ${siteId}`);
      return siteId;
    }
    const first = user.roles.find(({ role }) => mayDo(role, 'capture.take'));
    // Without any such role: refused with the words of the first site, or as somebody without sites.
    if (!first) requireRole(user, user.roles[0]?.siteId ?? 0, 'capture.take', 'captures');
    return first!.siteId;
  }
}

/** The last part of a name without control signs, at most 120 long. */
function shownName(name: string): string {
  const last = name.split(/[/\\]/).at(-1) ?? '';
  return (
    last
      .replace(/\p{Cc}/gu, '')
      .trim()
      .slice(0, 120) || 'capture.csv'
  );
}
