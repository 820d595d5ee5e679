import { type FrequencyResponse, frequencyResponse, type Margins, margins } from './frequency-response.js';
import { type ClosedLoop, closedLoop, closedLoopPoles, steadyErrors } from './loop.js';
import { checkController, type Controller, type Move, type SimulatedMove, simulateMove } from './move.js';
import { checkPlant, type Plant, UnphysicalInputError } from './plant.js';
import { abs } from './polynomial.js';
import {
  checkGains,
  fullFeedForward,
  type Gains,
  placeGains,
  type PolePattern,
  type Structure,
} from './pole-placement.js';
import { type SampledLoop, sampledLoop } from './sampled-loop.js';
import { sampledMaxSensitivity } from './sampled-margins.js';
import { type StepFigures, stepFigures } from './step-response.js';

/** A plant and a controller with a pattern to place, or with gains to analyse as they are. */
export interface DesignQuestion {
  plant: Plant;
  structure: Structure;
  /** Placed when there are no `gains`. */
  pattern?: PolePattern;
  /** Analysed as they are; a Kv or Ka left out is 0, or the full one with `feedForward`. */
  gains?: Pick<Gains, 'kp' | 'ki' | 'kd'> & Partial<Gains>;
  feedForward: boolean;
  controller: Controller;
  move?: Move;
  /** Hz, > 0; 200 logarithmic points when absent, see `defaultFrequencies`. */
  frequenciesHz?: readonly number[];
  /** The move starts as an axis in production does: held, its integrator at the bias. */
  holding?: boolean;
}

export interface Design {
  gains: Gains;
  closedLoop: ClosedLoop;
  step: StepFigures;
  errors: ReturnType<typeof steadyErrors>;
  margins: Margins;
  frequencyResponse: FrequencyResponse;
  sampled: SampledLoop & {
    /** Ms of the loop as it runs, all delays included; null when it is not stable. */
    maxSensitivity: number | null;
    maxSensitivityHz: number | null;
  };
  move: SimulatedMove | null;
}

/** Points of the frequency response when none are asked for. */
const DEFAULT_POINTS = 200;

/** 200 logarithmic points, Hz, from a tenth of the slowest pole (closed loop or plant), at most seven decades, up to the Nyquist frequency. */
export function defaultFrequencies(plant: Plant, gains: Gains, sampleTime: number): number[] {
  const sizes = [...closedLoopPoles(plant, gains).map(abs), plant.pole].filter((size) => size > 0);
  const nyquist = 0.5 / sampleTime;
  const low = Math.min(Math.max(Math.min(...sizes) / (20 * Math.PI), nyquist * 1e-7), nyquist / 10);
  const ratio = Math.log(nyquist / low) / (DEFAULT_POINTS - 1);
  return Array.from({ length: DEFAULT_POINTS }, (_, i) => low * Math.exp(ratio * i));
}

/**
 * Everything there is to say about one set of gains on one plant: the gains themselves (`placeGains`, unless
 * given), then the continuous loop without delays, the sampled loop and the move with them.
 *
 * @throws UnphysicalInputError naming the field
 */
export function design(question: DesignQuestion): Design {
  const { plant, structure, controller, move, frequenciesHz, holding } = question;
  checkPlant(plant);
  checkController(controller);
  const gains = gainsOf(question);
  const frequencies = frequenciesHz ?? defaultFrequencies(plant, gains, controller.sampleTime);
  const sampled = sampledLoop(plant, gains, controller);
  const measured = sampled.stable
    ? sampledMaxSensitivity(plant, gains, controller.sampleTime, controller.outputDelaySamples)
    : null;
  const sensitivity = measured !== null && Number.isFinite(measured.value) ? measured : null;
  return {
    gains,
    closedLoop: closedLoop(plant, gains, structure),
    step: stepFigures(plant, gains, structure),
    errors: steadyErrors(plant, gains, structure),
    margins: margins(plant, gains),
    frequencyResponse: frequencyResponse(plant, gains, structure, frequencies),
    sampled: {
      ...sampled,
      maxSensitivity: sensitivity?.value ?? null,
      maxSensitivityHz: sensitivity?.frequencyHz ?? null,
    },
    move: move
      ? simulateMove(
          plant,
          gains,
          structure,
          controller,
          move,
          holding ? { output: plant.bias ?? 0 } : undefined,
        )
      : null,
  };
}

function gainsOf({ plant, structure, pattern, gains, feedForward }: DesignQuestion): Gains {
  if (!gains) {
    if (!pattern) throw new UnphysicalInputError('pattern', 'is needed unless gains are given');
    return placeGains(plant, structure, pattern, feedForward);
  }
  const full = feedForward ? fullFeedForward(plant, structure, gains.kd) : { kv: 0, ka: 0 };
  const { kp, ki, kd, kv = full.kv, ka = full.ka } = gains;
  const complete = { kp, ki, kd, kv, ka };
  checkGains(complete);
  return complete;
}
