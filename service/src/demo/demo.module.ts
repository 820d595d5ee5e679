import { Injectable, Logger, Module } from '@nestjs/common';
import { ConfigService } from '@nestjs/config';
import { InjectDataSource } from '@nestjs/typeorm';
import { existsSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import type { DataSource, EntityManager } from 'typeorm';
import { hashOfToken, newToken } from '../auth/passwords.js';
import { placeGains } from '../control/pole-placement.js';
import { Transactions } from '../database/transactions.js';
import { Axis } from '../fleet/axis.entity.js';
import { Gateway } from '../fleet/gateway.entity.js';
import { Machine } from '../fleet/machine.entity.js';
import { Site } from '../fleet/site.entity.js';
import { TuningRevision } from '../fleet/tuning-revision.entity.js';
import { seedDemoPeople, seedDemoRota } from '../people/demo-people.js';
import type { Settings } from '../settings.js';
import { writeHistory } from './history.js';
import { AXES, GATEWAYS, SITES } from './tarnwick.js';

/** Commissioned this long before the demo is first started, ms. */
const COMMISSIONED_AGO = 40 * 86_400_000;

/** Fills an empty database with the demo's invented works, and hands the gateways' tokens to the simulator. */
@Injectable()
export class DemoSeed {
  private readonly log = new Logger('Demo');

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly config: ConfigService<Settings, true>,
  ) {}

  // At module start, so that everything that reads the tables at bootstrap finds them filled.
  async onModuleInit(): Promise<void> {
    if ((await this.dataSource.getRepository(Site).count()) > 0) return;
    const tokens = this.tokens();
    const started = Date.now();
    await this.transactions.run(async (manager) => {
      const sites = await manager.save(
        Site,
        SITES.map((site) => ({ ...site })),
      );
      const siteId = (name: string): number => sites.find((site) => site.name === name)!.id;
      for (const { name, site } of GATEWAYS)
        await manager.insert(Gateway, {
          name,
          siteId: siteId(site),
          tokenHash: hashOfToken(tokens[name]!),
          epoch: null,
          lastSeenAt: null,
        });
      const axes = await this.seedAxes(manager, siteId);
      await seedDemoPeople(
        manager,
        sites.map(({ id }) => id),
      );
      await seedDemoRota(
        manager,
        sites.map(({ id }) => id),
      );
      await writeHistory(manager, axes, new Date(started));
    });
    this.log.log(`Tarnwick Tileworks made up in ${Date.now() - started} ms`);
  }

  private async seedAxes(manager: EntityManager, siteId: (name: string) => number): Promise<Axis[]> {
    const appliedAt = new Date(Date.now() - COMMISSIONED_AGO);
    const machines = new Map<string, Machine>();
    const axes: Axis[] = [];
    for (const { site, machine, lambda, ...sheet } of AXES) {
      const key = `${site} ${machine}`;
      if (!machines.has(key))
        machines.set(key, await manager.save(Machine, { siteId: siteId(site), name: machine }));
      const pattern = { kind: 'triple', lambda } as const;
      const axis = await manager.save(Axis, {
        ...sheet,
        siteId: siteId(site),
        machineId: machines.get(key)!.id,
        pattern,
        baselineAt: appliedAt,
        revision: 1,
        stateSince: appliedAt,
      });
      await manager.insert(TuningRevision, {
        axisId: axis.id,
        revision: 1,
        structure: sheet.structure,
        pattern,
        feedForward: sheet.feedForward,
        gains: placeGains(
          { gain: sheet.baseline.gain, pole: sheet.baseline.pole },
          sheet.structure,
          pattern,
          sheet.feedForward,
        ),
        plant: sheet.baseline,
        source: 'commissioning',
        proposalId: null,
        appliedAt,
        appliedBy: 'Commissioning',
        note: 'As commissioned',
      });
      axes.push(axis);
    }
    return axes;
  }

  /** The tokens by gateway; the simulator reads the same file. */
  private tokens(): Record<string, string> {
    const path = join(this.config.get('DATA_DIR', { infer: true }), 'gateway-tokens.json');
    if (existsSync(path)) return JSON.parse(readFileSync(path, 'utf8')) as Record<string, string>;
    const tokens = Object.fromEntries(GATEWAYS.map(({ name }) => [name, newToken()]));
    writeFileSync(path, JSON.stringify(tokens, null, 2), { mode: 0o600 });
    return tokens;
  }
}

@Module({ providers: [DemoSeed] })
export class DemoModule {}
