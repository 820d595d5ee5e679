import { Injectable } from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { createHash } from 'node:crypto';
import { Counter } from 'prom-client';
import { In, type DataSource } from 'typeorm';
import type { Gains, Structure } from '../control/pole-placement.js';
import { tell } from '../events.js';
import { Axis } from '../fleet/axis.entity.js';
import { Gateway } from '../fleet/gateway.entity.js';
import { TuningRevision } from '../fleet/tuning-revision.entity.js';
import { groupBy } from '../group-by.js';
import { IntakeLine, type GatewaySession } from './intake-line.service.js';
import { IntakeService } from './intake.service.js';
import { serviceNow } from './service-clock.js';

export interface HelloAnswer {
  axes: {
    tag: string;
    index: number;
    id: number;
    resolution: number;
    gains: Gains | null;
    revision: number;
    structure: Structure;
    maintenance: boolean;
  }[];
  durableSequence: number;
  unknown: string[];
}

export const MAX_AXES = 65_535;
export const MAX_EPOCH_LENGTH = 200;
/** Most values of one IN list. */
const LIST = 500;

const refusedConnections = new Counter({
  name: 'polewright_gateway_refused_total',
  help: 'Telemetry connections refused for their token',
});

/** Who a gateway is and what it serves, the same for a socket and for HTTP. */
@Injectable()
export class GatewaySessions {
  /** Sessions by HTTP, which has no connection to hang them on; by gateway. */
  private readonly http = new Map<number, GatewaySession>();

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly intake: IntakeService,
    private readonly line: IntakeLine,
    private readonly emitter: EventEmitter2,
  ) {}

  /**
   * The gateway of a token.
   *
   * @throws Error in words when there is none; it is counted
   */
  async gatewayOf(token: unknown): Promise<Gateway> {
    try {
      if (typeof token !== 'string' || token.length === 0)
        throw new Error('a gateway token is needed: auth: { token }, or Authorization: Bearer');
      const gateway = await this.dataSource
        .getRepository(Gateway)
        .findOneBy({ tokenHash: createHash('sha256').update(token).digest('hex') });
      if (!gateway) throw new Error('this gateway token is not known');
      return gateway;
    } catch (error) {
      refusedConnections.inc();
      throw error;
    }
  }

  open(gateway: Gateway): GatewaySession {
    return { progress: this.intake.progress(gateway), served: [] };
  }

  openHttp(gateway: Gateway): GatewaySession {
    const session = this.open(gateway);
    this.http.set(gateway.id, session);
    return session;
  }

  httpSession(gatewayId: number): GatewaySession | undefined {
    return this.http.get(gatewayId);
  }

  /** The gateway goes on by a socket. */
  endHttp(gatewayId: number): void {
    this.http.delete(gatewayId);
  }

  /** Finds the axes of the tags on the gateway's site, gives them their indices and says what is durable. */
  async hello(session: GatewaySession, tags: readonly string[], epoch: string): Promise<HelloAnswer> {
    const { progress } = session;
    const wanted = [...new Set(tags)];
    const known = new Map<string, Axis>();
    const tunings: TuningRevision[] = [];
    for (let i = 0; i < wanted.length; i += LIST) {
      const axes = await this.dataSource
        .getRepository(Axis)
        .findBy({ siteId: progress.siteId, tag: In(wanted.slice(i, i + LIST)) });
      for (const axis of axes) known.set(axis.tag, axis);
      for (const [revision, same] of groupBy(axes, (axis) => axis.revision))
        tunings.push(
          ...(await this.dataSource
            .getRepository(TuningRevision)
            .findBy({ revision, axisId: In(same.map(({ id }) => id)) })),
        );
    }
    const tuningOf = new Map(tunings.map((tuning) => [tuning.axisId, tuning]));
    const served = wanted.flatMap((tag) => known.get(tag) ?? []);
    for (const axis of served) this.intake.pipelineFor(axis);
    // What was sent before belongs to the indices and the epoch before.
    this.line.finish(progress.id);
    this.line.letRun(progress.id);
    this.intake.startEpoch(progress, epoch);
    progress.lastSeenAt = serviceNow();
    session.served = served.map(({ id }) => id);
    tell(this.emitter, 'gateway.greeted', { gatewayId: progress.id, axisIds: session.served });
    return {
      axes: served.map((axis, index) => {
        const tuning = tuningOf.get(axis.id);
        return {
          tag: axis.tag,
          index,
          id: axis.id,
          resolution: axis.resolution,
          gains: tuning?.gains ?? null,
          revision: axis.revision,
          structure: tuning?.structure ?? axis.structure,
          maintenance: axis.inMaintenance,
        };
      }),
      durableSequence: progress.durable,
      unknown: wanted.filter((tag) => !known.has(tag)),
    };
  }
}
