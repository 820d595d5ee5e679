import { expect } from 'vitest';
import type { Gains } from '../../src/control/pole-placement.js';
import { commission, FakeGateway, type CommissionedAxis } from '../support/fake-gateway.js';
import { ProductionAxis } from '../support/production-axis.js';
import { until, type Caller, type Service } from '../support/start-service.js';

export const PLANT = { gain: 12, pole: 20 };
export const LAMBDA = 30;
const STEP_US = 2_000;
const RESOLUTION = 0.005;

export interface ProposalBody {
  id: number;
  state: string;
  version: number;
  source: string;
  restoring: boolean;
  probableCause: { name: string; advice: string } | null;
  evidence: {
    estimate: Record<'gain' | 'pole', { value: number; low: number; high: number }>;
    decisions: { quantity: string; sentence: string }[];
  };
  current: { revision: number; gains: Gains };
  proposed: { structure: string; lambda: number; gains: Gains } | null;
  expected: { before: { peakFollowingError: number }; after: { peakFollowingError: number } | null } | null;
  binding: { kept: boolean } | null;
  events: { by: string; action: string; note: string | null; version: number }[];
  checklist: { key: string; text: string }[];
  trial: {
    verdict: string;
    moves: { before: number; after: number };
    peakFollowingError: { before: number; after: number } | null;
  } | null;
}

/** A commissioned axis that runs, its gateway, and the steps of its proposals by the API. */
export class ProposalBench {
  private sequence = 0;
  /** Of the next sample; the clock of the samples runs as fast as they are made. */
  private nextUs: number;

  private constructor(
    private readonly viewer: Caller,
    readonly axis: CommissionedAxis,
    readonly gateway: FakeGateway,
    readonly machine: ProductionAxis,
    history: number,
  ) {
    this.nextUs = (Math.floor(Date.now() / 1000) - history) * 1e6;
  }

  /** @param history s of samples that fit before now */
  static async start(service: Service, history: number): Promise<ProposalBench> {
    const axis = await commission(
      { admin: await service.as('admin'), engineer: await service.as('engineer') },
      service.siteIds[0],
      { sampleTime: STEP_US / 1e6, resolution: RESOLUTION, baseline: PLANT },
    );
    const gateway = await FakeGateway.connect(service.url, { token: axis.token });
    const { axes } = await gateway.hello([axis.tag], 'a');
    const machine = new ProductionAxis({ ...PLANT, coulomb: 2 }, axes[0]!.gains, STEP_US, RESOLUTION);
    return new ProposalBench(await service.as('viewer'), axis, gateway, machine, history);
  }

  /** Streams so many seconds, one message a second. */
  async stream(seconds: number, production = true): Promise<void> {
    for (let s = 0; s < seconds; s++) {
      const answer = await this.gateway.frame(++this.sequence, [
        this.machine.run(this.nextUs, 1, production),
      ]);
      expect(answer).toEqual({ received: this.sequence });
      this.nextUs += 1e6;
    }
    await this.gateway.untilDurable(this.sequence);
  }

  /** The samples' clock goes on from now. */
  skipToNow(): void {
    this.nextUs = Math.ceil(Date.now() / 1000) * 1e6;
  }

  async open(): Promise<ProposalBody | undefined> {
    const { body } = await this.viewer
      .get(`/api/v1/proposals?state=open&axisId=${this.axis.axisId}`)
      .expect(200);
    const [found] = (body as { items: { id: number }[] }).items;
    return found && this.get(found.id);
  }

  async get(id: number): Promise<ProposalBody> {
    return (await this.viewer.get(`/api/v1/proposals/${id}`).expect(200)).body as ProposalBody;
  }

  untilState(id: number, state: string): Promise<ProposalBody> {
    return until(`proposal ${id} is ${state}`, async () => {
      const proposal = await this.get(id);
      return proposal.state === state && proposal;
    });
  }

  maintain(caller: Caller, on: boolean): Promise<unknown> {
    return caller
      .post(`/api/v1/axes/${this.axis.axisId}/maintenance`)
      .send({ on, reason: 'Retune' })
      .expect(200);
  }

  async axisBody(): Promise<{
    revision: number;
    gains: Gains;
    baseline: { gain: number; pole: number };
    estimate: { gain: { value: number }; pole: { value: number } };
  }> {
    return (await this.viewer.get(`/api/v1/axes/${this.axis.axisId}`).expect(200)).body as never;
  }

  /** What the controller would read back: the gains as float32, and from then on it runs with them. */
  async readBack(order: { revision: number; gains: Gains }, wrong: Partial<Gains> = {}): Promise<void> {
    const { kp, ki, kd, kv, ka } = order.gains;
    const gains = {
      kp: Math.fround(kp),
      ki: Math.fround(ki),
      kd: Math.fround(kd),
      kv: Math.fround(kv),
      ka: Math.fround(ka),
      ...wrong,
    };
    this.machine.take(gains);
    const answer = await this.gateway.ask('gains-applied', {
      axisId: this.axis.axisId,
      revision: order.revision,
      gains,
    });
    expect(answer).toEqual({ received: true });
  }
}

/** Gains by the closed formula for a triple real pole, PI-D with feed-forward. */
export const closedFormula = (gain: number, pole: number, lambda: number): Gains => ({
  kp: (3 * lambda ** 2) / (gain * pole),
  ki: lambda ** 3 / (gain * pole),
  kd: (3 * lambda - pole) / (gain * pole),
  kv: 1 / gain + (3 * lambda - pole) / (gain * pole),
  ka: 1 / (gain * pole),
});
