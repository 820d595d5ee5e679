import { Injectable, type OnApplicationBootstrap } from '@nestjs/common';
import { OnEvent } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import type { DataSource } from 'typeorm';
import { Transactions } from '../database/transactions.js';
import type { Events } from '../events.js';
import { Gateway } from '../fleet/gateway.entity.js';
import { groupBy } from '../group-by.js';
import { IntakeService } from '../telemetry/intake.service.js';
import { insertAll } from './alert-steps.service.js';
import { ServedAxis } from './served-axis.entity.js';

/** What is known of a gateway that serves axes. */
export interface WatchedGateway {
  id: number;
  name: string;
  /** s since anything came from it; null before the first */
  silence: number | null;
  axisIds: number[];
}

/** Knows which gateway serves which axes, also while it is away, and how long it has been silent. */
@Injectable()
export class GatewaySilence implements OnApplicationBootstrap {
  private served = new Map<number, number>();
  private readonly names = new Map<number, string>();

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly intake: IntakeService,
  ) {}

  async onApplicationBootstrap(): Promise<void> {
    const rows = await this.dataSource.getRepository(ServedAxis).find();
    this.served = new Map(rows.map(({ axisId, gatewayId }) => [axisId, gatewayId]));
    for (const { id, name } of await this.dataSource.getRepository(Gateway).find()) this.names.set(id, name);
  }

  @OnEvent('gateway.greeted')
  async greeted({ gatewayId, axisIds }: Events['gateway.greeted']): Promise<void> {
    if (!this.names.has(gatewayId)) {
      const gateway = await this.dataSource.getRepository(Gateway).findOneBy({ id: gatewayId });
      this.names.set(gatewayId, gateway?.name ?? String(gatewayId));
    }
    const fresh = axisIds.filter((axisId) => this.served.get(axisId) !== gatewayId);
    if (fresh.length === 0) return;
    await this.transactions.run(async (manager) => {
      for (const axisId of fresh) await manager.delete(ServedAxis, { axisId });
      await insertAll(
        manager,
        ServedAxis,
        fresh.map((axisId) => ({ axisId, gatewayId })),
      );
    });
    for (const axisId of fresh) this.served.set(axisId, gatewayId);
  }

  /** Every gateway that has served an axis. */
  all(at: Date): WatchedGateway[] {
    return [...groupBy(this.served, ([, gatewayId]) => gatewayId)].map(([id, axes]) => {
      const seen = this.intake.progressOf(id)?.lastSeenAt ?? null;
      return {
        id,
        name: this.names.get(id) ?? String(id),
        silence: seen === null ? null : Math.max(0, (at.getTime() - seen) / 1000),
        axisIds: axes.map(([axisId]) => axisId),
      };
    });
  }
}
