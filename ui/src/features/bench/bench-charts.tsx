import { Bode, type BodeCurve, type FrequencyMark } from '../../charts/bode';
import { MoveChart, type Series } from '../../charts/move-chart';
import { PoleMap, type PoleSet } from '../../charts/pole-map';
import type { Schemas } from '../../api/client';
import { significant } from '../../components/quantity';
import classes from './bench.module.css';

type Answer = Schemas['DesignAnswerDto'];
type Trace = NonNullable<Answer['move']>['trace'];

interface Compared {
  /** What today's gains give; none while they are worked out or where the axis has no gains. */
  today: Answer | undefined;
  tried: Answer;
}

/** Poles as designed, as sampled, and as the axis runs today, with the zeros that the structure adds. */
export function BenchPoles({ today, tried }: Compared) {
  const sets: PoleSet[] = [
    { label: 'tried', poles: tried.closedLoop.poles, zeros: tried.closedLoop.zeros },
    { label: 'tried, as sampled', poles: nearPoles(tried), plus: true, faint: true },
    ...(today ? [{ label: 'today', poles: today.closedLoop.poles, faint: true }] : []),
  ];
  return <PoleMap sets={sets} />;
}

/** The differentiator's own pole lies far out and would squeeze the rest: the table of figures speaks for it. */
function nearPoles({ sampled, closedLoop }: Answer): Answer['sampled']['equivalentPoles'] {
  const reach = 3 * Math.max(...closedLoop.poles.map(({ re, im }) => Math.hypot(re, im)));
  return sampled.equivalentPoles.filter(({ re, im }) => Math.hypot(re, im) <= reach);
}

/** Open and closed loop with margins, bandwidth, peak, and the frequency of the move itself. */
export function BenchBode({ today, tried, moveHz }: Compared & { moveHz: number }) {
  const { margins, closedLoop } = tried;
  const curves = (of: 'openLoop' | 'closedLoop'): BodeCurve[] => [
    curveOf('tried', tried, of),
    ...(today ? [{ ...curveOf('today', today, of), dashed: true }] : []),
  ];
  const move: FrequencyMark = { hz: moveHz, words: 'the move’s own frequency, one over its duration' };
  const open: FrequencyMark[] = [
    ...margins.gainCrossovers.map(({ frequencyHz, phaseMarginDeg, delayMargin }) => ({
      hz: frequencyHz,
      words: `gain crossover: phase margin ${significant(phaseMarginDeg)}°, delay margin ${significant(delayMargin * 1000)} ms`,
    })),
    ...(margins.phaseCrossoverHz === null
      ? []
      : [{ hz: margins.phaseCrossoverHz, words: `phase crossover: gain margin ${gainMargin(margins)}` }]),
    ...(margins.maxSensitivityHz === null || margins.maxSensitivity === null
      ? []
      : [
          {
            hz: margins.maxSensitivityHz,
            words: `largest sensitivity, Ms = ${significant(margins.maxSensitivity)}`,
          },
        ]),
    move,
  ];
  const closed: FrequencyMark[] = [
    ...(closedLoop.bandwidthHz === null ? [] : [{ hz: closedLoop.bandwidthHz, words: 'bandwidth, −3 dB' }]),
    ...(closedLoop.peakHz === null || closedLoop.peakDb === null
      ? []
      : [{ hz: closedLoop.peakHz, words: `peak, ${significant(closedLoop.peakDb)} dB` }]),
    move,
  ];
  return (
    <div className={classes.pair}>
      <Bode curves={curves('openLoop')} marks={open} />
      <Bode curves={curves('closedLoop')} loop="closed loop" marks={closed} />
    </div>
  );
}

const gainMargin = ({ gainMarginHighDb, gainMarginLowDb }: Answer['margins']): string =>
  [gainMarginHighDb, gainMarginLowDb]
    .flatMap((db) => (db === null ? [] : [`${significant(db)} dB`]))
    .join(' and ') || 'none';

function curveOf(label: string, { frequencyResponse }: Answer, of: 'openLoop' | 'closedLoop'): BodeCurve {
  const { magnitudeDb, phaseDeg } = frequencyResponse[of];
  return {
    label,
    frequencyHz: frequencyResponse.frequencyHz,
    magnitudeDb,
    phaseDeg: of === 'closedLoop' ? unwrapped(phaseDeg) : phaseDeg,
  };
}

/** A phase without the jumps of a whole turn, for the eye. */
function unwrapped(phase: readonly number[]): number[] {
  let turns = 0;
  return phase.map((value, i) => {
    if (i > 0) turns -= Math.round((value - phase[i - 1]!) / 360);
    return value + 360 * turns;
  });
}

/** Target, position, velocity, following error, output and integrator: today dashed, tried solid. */
export function BenchMoves({
  today,
  tried,
  tolerance,
}: {
  today: Trace | undefined;
  tried: Trace;
  /** Largest following error, mm; none for a step, which no axis follows. */
  tolerance?: number;
}) {
  const pair = (of: (trace: Trace) => number[]): Series[] => [
    { label: 'tried', time: tried.time, values: of(tried) },
    ...(today ? [{ label: 'today', time: today.time, values: of(today), dashed: true }] : []),
  ];
  return (
    <div className={classes.moves}>
      <MoveChart
        title="position"
        unit="mm"
        series={[
          ...pair(({ position }) => position),
          { label: 'target', time: tried.time, values: tried.target, dotted: true },
        ]}
      />
      <MoveChart title="velocity" unit="mm/s" digits={1} series={pair(({ velocity }) => velocity)} />
      <MoveChart
        title="following error"
        unit="mm"
        digits={3}
        series={pair(({ target, position }) => target.map((r, i) => r - position[i]!))}
        {...(tolerance && { limit: { value: tolerance, label: `tolerance ${tolerance} mm` } })}
      />
      <MoveChart
        title="output"
        unit="%"
        digits={1}
        series={pair(({ output }) => output)}
        {...(reaches(today, tried) && { limit: { value: 100, label: 'limit 100 %' } })}
      />
      <MoveChart title="integrator" unit="%" digits={1} series={pair(({ integrator }) => integrator)} />
    </div>
  );
}

/** Whether an output comes near its limit, so that the limit is worth its room. */
const reaches = (...traces: (Trace | undefined)[]): boolean =>
  traces.some((trace) => trace?.output.some((u) => Math.abs(u) > 50));
