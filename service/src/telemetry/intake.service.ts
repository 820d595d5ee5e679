import { Injectable, Logger, type OnApplicationBootstrap, type OnApplicationShutdown } from '@nestjs/common';
import { EventEmitter2, OnEvent } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { Counter, Gauge, Histogram } from 'prom-client';
import type { DataSource } from 'typeorm';
import { patternFrequency } from '../control/pole-placement.js';
import { tell, type Events } from '../events.js';
import { Axis } from '../fleet/axis.entity.js';
import { groupBy } from '../group-by.js';
import { Gateway } from '../fleet/gateway.entity.js';
import { AxisCheckpoint } from './axis-checkpoint.entity.js';
import { AxisPipeline, type AxisFacts } from './axis-pipeline.js';
import { CheckpointWriter, type WrittenAxis } from './checkpoint-writer.js';
import { checkTime, endOf, MAX_AHEAD_US, MAX_JUMP, Refusal } from './frame-bounds.js';
import { decodeFrame, FrameError, type Frame } from './frame-codec.js';
import { progressOf, type GatewayProgress, type GatewayWatch } from './gateway-progress.js';
import { SampleRecorder } from './sample-recorder.js';
import { serviceNow } from './service-clock.js';

export type FrameAnswer = { received: number } | { rejected: string; sequence: number | null };

const CHECKPOINT_EVERY_MS = 1_000;

const framesTotal = new Counter({
  name: 'polewright_frames_total',
  help: 'Telemetry messages by outcome',
  labelNames: ['outcome'],
});
const samplesTotal = new Counter({ name: 'polewright_samples_total', help: 'Samples taken in' });
const checkpointSeconds = new Histogram({
  name: 'polewright_checkpoint_seconds',
  help: 'Time in which a checkpoint is written and nothing is taken in',
  buckets: [0.01, 0.025, 0.05, 0.1, 0.15, 0.25, 0.5, 1, 2.5],
});
const longestCheckpoint = new Gauge({
  name: 'polewright_checkpoint_longest_seconds',
  help: 'Longest checkpoint since the service started',
});
const checkpointFailures = new Counter({
  name: 'polewright_checkpoint_failures_total',
  help: 'Checkpoints that could not be written and were tried again',
});
const gapsTotal = new Counter({
  name: 'polewright_sequence_gaps_total',
  help: 'Gaps in a gateway’s sequence',
});

/** Takes frames in, runs the axes' pipelines, and makes what they found durable at a steady beat. */
@Injectable()
export class IntakeService implements OnApplicationBootstrap, OnApplicationShutdown {
  private readonly log = new Logger(IntakeService.name);
  private readonly pipelines = new Map<number, AxisPipeline>();
  private readonly gateways = new Map<number, GatewayProgress>();
  private readonly traced = new Set<number>();
  private writer: CheckpointWriter;
  private timer: NodeJS.Timeout | undefined;
  private failedCheckpoints = 0;
  private lastCheckpoint: number | null = null;
  private longestCheckpoint = 0;

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly emitter: EventEmitter2,
    private readonly recorder: SampleRecorder,
  ) {}

  async onApplicationBootstrap(): Promise<void> {
    this.writer = new CheckpointWriter(this.dataSource);
    for (const axis of await this.dataSource.getRepository(Axis).find()) this.addPipeline(axis);
    const saved = await this.dataSource
      .getRepository(AxisCheckpoint)
      .find({ order: { axisId: 'ASC', part: 'ASC' } });
    for (const [axisId, [judgement, ...parts]] of groupBy(saved, (row) => row.axisId)) {
      const pipeline = this.pipelines.get(axisId);
      if (!pipeline || !judgement) continue;
      if (
        !pipeline.restore(
          judgement.state.toString('utf8'),
          parts.map(({ state }) => state),
        )
      )
        this.log.warn(`The saved state of axis ${axisId} has another layout; its identification starts anew`);
      if (pipeline.forgetFuture(1000 * serviceNow() + MAX_AHEAD_US))
        this.log.warn(`Axis ${axisId} has samples from the future; it goes on with what comes now`);
    }
    for (const gateway of await this.dataSource.getRepository(Gateway).find()) this.addGateway(gateway);
    this.timer = setInterval(() => this.checkpoint(), CHECKPOINT_EVERY_MS);
  }

  onApplicationShutdown(): void {
    clearInterval(this.timer);
    // Only written: whoever would be told works on the database, which closes next.
    if (this.writer) this.write();
  }

  all(): AxisPipeline[] {
    return [...this.pipelines.values()];
  }

  pipeline(axisId: number): AxisPipeline | undefined {
    return this.pipelines.get(axisId);
  }

  /** The pipeline of an axis, made if the axis is new. */
  pipelineFor(axis: Axis): AxisPipeline {
    return this.pipelines.get(axis.id) ?? this.addPipeline(axis);
  }

  progress(gateway: Gateway): GatewayProgress {
    return this.gateways.get(gateway.id) ?? this.addGateway(gateway);
  }

  progressOf(gatewayId: number): GatewayProgress | undefined {
    return this.gateways.get(gatewayId);
  }

  /** How the checkpoints fare, s. */
  checkpoints(): { lastCheckpoint: number | null; longestCheckpoint: number; failedCheckpoints: number } {
    const { lastCheckpoint, longestCheckpoint, failedCheckpoints } = this;
    return { lastCheckpoint, longestCheckpoint, failedCheckpoints };
  }

  /** A gateway says in which counting period it is; a new one counts from 1 again. */
  startEpoch(progress: GatewayProgress, epoch: string): void {
    if (progress.epoch === epoch) return;
    progress.epoch = epoch;
    progress.received = 0;
    progress.durable = 0;
    progress.jumpTo = null;
  }

  /** Which axes' raw samples somebody wants to see live. */
  trace(axisIds: Iterable<number>): void {
    this.traced.clear();
    for (const id of axisIds) this.traced.add(id);
  }

  /**
   * Takes one message of a gateway.
   *
   * @param served axis ids by the index that `hello` gave them
   * @returns the sequence taken, also for one that was taken before; or why the whole message is refused
   */
  take(progress: GatewayProgress, served: readonly number[], message: Uint8Array): FrameAnswer {
    let sequence: number | null = null;
    try {
      const frame = decodeFrame(message);
      sequence = frame.sequence;
      const now = serviceNow();
      const pipelines = this.pipelinesOf(frame, served, now);
      progress.lastSeenAt = now;
      if (sequence <= progress.received) {
        progress.watch.duplicates++;
        framesTotal.inc({ outcome: 'duplicate' });
        return { received: sequence };
      }
      this.checkSequence(progress, sequence, served);
      let samples = 0;
      let newestUs = 0;
      for (let b = 0; b < pipelines.length; b++) {
        const block = frame.blocks[b]!;
        const pipeline = pipelines[b]!;
        progress.watch.droppedSamples += pipeline.push(block);
        this.recorder.push(pipeline.facts.id, block);
        samples += block.target.length;
        newestUs = Math.max(newestUs, endOf(block));
        if (this.traced.has(pipeline.facts.id))
          tell(this.emitter, 'samples.received', { axisId: pipeline.facts.id, block });
      }
      progress.received = sequence;
      progress.watch.taken(now, samples, newestUs);
      framesTotal.inc({ outcome: 'taken' });
      samplesTotal.inc(samples);
      return { received: sequence };
    } catch (error) {
      const reason =
        error instanceof FrameError || error instanceof Refusal ? error.reason : 'internal-error';
      if (reason === 'internal-error') this.log.error('A frame could not be taken', (error as Error).stack);
      return this.refuse(progress.watch, reason, (error as Error).message, sequence);
    }
  }

  /** Counts a refusal and puts it into words. */
  refuse(watch: GatewayWatch, reason: string, message: string, sequence: number | null = null): FrameAnswer {
    watch.refused(reason);
    framesTotal.inc({ outcome: reason });
    return { rejected: `${reason}: ${message}`, sequence };
  }

  /** The pipeline of each block, once all blocks are what hello and the clock allow. */
  private pipelinesOf({ blocks }: Frame, served: readonly number[], now: number): AxisPipeline[] {
    return blocks.map((block, b) => {
      const axisId = served[block.axisIndex];
      const pipeline = axisId === undefined ? undefined : this.pipelines.get(axisId);
      if (!pipeline)
        throw new Refusal(
          'unknown-axis',
          `block ${b} names axis index ${block.axisIndex}, which hello did not give`,
        );
      if (block.sampleTimeUs !== Math.round(pipeline.facts.sampleTime * 1e6))
        throw new Refusal(
          'wrong-sample-time',
          `block ${b}: sample time ${block.sampleTimeUs} µs, ${pipeline.facts.tag} is registered with ${pipeline.facts.sampleTime * 1e6} µs`,
        );
      checkTime(block, b, 1000 * now);
      return pipeline;
    });
  }

  /** A sequence that skips some is a gap of every axis served; one that skips many must come twice. */
  private checkSequence(progress: GatewayProgress, sequence: number, served: readonly number[]): void {
    const { received, jumpTo } = progress;
    progress.jumpTo = null;
    if (sequence === received + 1) return;
    if (sequence > received + MAX_JUMP && sequence !== jumpTo) {
      progress.jumpTo = sequence;
      throw new Refusal(
        'sequence-jump',
        `sequence ${sequence} comes after ${received}; a step of more than ${MAX_JUMP} is taken when the message is sent again`,
      );
    }
    progress.watch.gaps++;
    gapsTotal.inc();
    for (const axisId of served) this.pipelines.get(axisId)?.gap();
  }

  /** Writes what is known by now in one transaction, then tells the others. A failed write is tried again. */
  checkpoint(): void {
    const written = this.write();
    if (!written) return;
    for (const { axisId, seconds, moves, estimates } of written) {
      if (seconds.length > 0) tell(this.emitter, 'seconds.closed', { axisId, seconds });
      const last = estimates.at(-1);
      if (last) {
        tell(this.emitter, 'window.closed', { axisId, t: last.t, moves });
        tell(this.emitter, 'estimate.updated', { axisId, t: last.t, estimate: last.estimate });
        const { decisions } = last;
        if (decisions?.gain.state === 'drifted' || decisions?.pole.state === 'drifted')
          tell(this.emitter, 'drift.decided', { axisId, decisions });
      }
    }
    tell(this.emitter, 'checkpoint.written', { at: new Date() });
  }

  private write(): WrittenAxis[] | null {
    try {
      const from = performance.now();
      const written = this.writer.write([...this.pipelines.values()], [...this.gateways.values()]);
      const took = (performance.now() - from) / 1000;
      checkpointSeconds.observe(took);
      this.lastCheckpoint = took;
      this.longestCheckpoint = Math.max(this.longestCheckpoint, took);
      longestCheckpoint.set(this.longestCheckpoint);
      this.failedCheckpoints = 0;
      return written;
    } catch (error) {
      this.failedCheckpoints++;
      checkpointFailures.inc();
      this.log.error(
        `Checkpoint failed ${this.failedCheckpoints} time(s) in a row: ${(error as Error).message}`,
      );
      return null;
    }
  }

  /** An axis was registered or changed: tolerances, baseline, revision and maintenance count from here on. */
  @OnEvent('axis.changed', { suppressErrors: false })
  async axisChanged({ axisId }: Events['axis.changed']): Promise<void> {
    const axis = await this.dataSource.getRepository(Axis).findOneBy({ id: axisId });
    if (axis) this.update(axis);
  }

  /** Takes over an axis's facts; a new baseline or tolerance starts its drift chart anew. */
  update(axis: Axis): void {
    const pipeline = this.pipelines.get(axis.id);
    if (!pipeline) return void this.addPipeline(axis);
    const facts = factsOf(axis);
    const before = pipeline.facts;
    if (facts.inMaintenance !== before.inMaintenance) pipeline.gap();
    if (
      JSON.stringify(facts.baseline) !== JSON.stringify(before.baseline) ||
      JSON.stringify(facts.tolerances) !== JSON.stringify(before.tolerances)
    )
      pipeline.restartDrift(facts);
    else pipeline.facts = facts;
  }

  private addPipeline(axis: Axis): AxisPipeline {
    const pipeline = new AxisPipeline(factsOf(axis));
    this.pipelines.set(axis.id, pipeline);
    return pipeline;
  }

  private addGateway(gateway: Gateway): GatewayProgress {
    const progress = progressOf(gateway);
    this.gateways.set(gateway.id, progress);
    return progress;
  }
}

function factsOf(axis: Axis): AxisFacts {
  return {
    id: axis.id,
    siteId: axis.siteId,
    tag: axis.tag,
    sampleTime: axis.sampleTime,
    resolution: axis.resolution,
    loopFrequency: patternFrequency(axis.pattern),
    baseline: axis.baseline,
    tolerances: axis.tolerances,
    revision: axis.revision,
    inMaintenance: axis.inMaintenance,
  };
}
