import { DriftPlot } from '../../charts/drift-plot';
import { MoveChart } from '../../charts/move-chart';
import { Card } from '../../components/card';
import { LambdaRuler, rulerText } from '../../components/lambda-ruler';
import { Quantity, significant } from '../../components/quantity';
import { ScrollX } from '../../components/scroll-x';
import { SiteTime } from '../../components/site-time';
import { GAIN_ROWS } from './gain-rows';
import classes from './proposal-page.module.css';
import type { Proposal } from './proposals-api';

export function Why({ proposal: { evidence } }: { proposal: Proposal }) {
  const { estimate, baseline, decisions, indicators, tolerances, trail } = evidence;
  return (
    <Card title="Why" sub={`95 % intervals from ${estimate.movingSeconds.toFixed(0)} s of production moves`}>
      <div className={classes.evidence}>
        <DriftPlot
          size={112}
          state={decisions.length > 0 ? 'out-of-tune' : 'in-tune'}
          tolerances={tolerances}
          trail={trail}
          point={{
            gainRatio: estimate.gain.value / baseline.gain,
            poleRatio: estimate.pole.value / baseline.pole,
          }}
          covariance={estimate.lnCovariance}
        />
        <div>
          {decisions.map(({ quantity, sentence }) => (
            <p key={quantity}>
              <b style={{ fontWeight: 600 }}>{sentence}</b>
            </p>
          ))}
          <p>
            Gain <Quantity {...estimate.gain} unit="(mm/s)/%" />, pole{' '}
            <Quantity {...estimate.pole} unit="rad/s" />, dry friction{' '}
            <Quantity {...estimate.coulomb} unit="%" />, bias <Quantity {...estimate.bias} unit="%" />.
          </p>
          {indicators?.peakFollowingError != null && (
            <p>
              Peak following error {significant(indicators.peakFollowingError)} mm in the minute before;
              tolerance {tolerances.followingError} mm.
            </p>
          )}
          {estimate.remarks.map((remark) => (
            <p key={remark} className="soft small">
              {remark}
            </p>
          ))}
        </div>
      </div>
    </Card>
  );
}

const CAUSE_TITLES: Record<NonNullable<Proposal['probableCause']>['name'], string> = {
  load: 'a change of load',
  'viscous drag': 'viscous drag',
  'actuating force': 'actuating force',
  'dry friction': 'dry friction',
  offset: 'an offset',
  'one direction': 'one direction of travel',
  unclear: 'unclear',
};

export function ProbableCause({ cause }: { cause: NonNullable<Proposal['probableCause']> }) {
  const others = cause.alternatives.filter(({ confidence }) => confidence >= 0.01).slice(0, 3);
  return (
    <Card
      title={`Probably: ${CAUSE_TITLES[cause.name]}`}
      sub={`fits ${cause.confidence.toFixed(2)}${others.map(({ name, confidence }) => `; ${CAUSE_TITLES[name]} fits ${confidence.toFixed(2)}`).join('')}`}
    >
      <p style={{ margin: 0 }}>{cause.sentence}</p>
      {cause.advice === 'inspect first' ? (
        <p style={{ margin: '8px 0 0', color: 'var(--drift)', fontWeight: 600 }}>
          Inspect first. A retune around worn mechanics or weak supply hides a fault; it is a stop-gap at
          best.
        </p>
      ) : (
        <p className="soft" style={{ margin: '8px 0 0' }}>
          Retuning is the right answer if the load is meant to stay. If nobody changed it, look for what drags
          or is loose first.
        </p>
      )}
    </Card>
  );
}

export function WhatChanges({ proposal: { current, proposed } }: { proposal: Proposal }) {
  if (!proposed) return null;
  const kept =
    current.lambda !== null &&
    proposed.lambda !== null &&
    Math.abs(proposed.lambda / current.lambda - 1) < 1e-9;
  return (
    <Card
      title="What changes"
      sub={
        proposed.lambda === null
          ? `${proposed.structure}, gains given by hand`
          : `${proposed.structure}, ${proposed.pattern?.kind === 'triple' ? 'three poles' : `${proposed.pattern?.kind} poles`} at λ = ${proposed.lambda.toFixed(1)} rad/s${kept ? ', as commissioned' : ''}, feed-forward ${proposed.feedForward ? 'on' : 'off'}`
      }
    >
      <table className="plain-table">
        <thead>
          <tr>
            <th>Gain</th>
            <th>now</th>
            <th>proposed</th>
            <th>ratio</th>
          </tr>
        </thead>
        <tbody>
          {GAIN_ROWS.map(([name, label, unit]) => (
            <tr key={name}>
              <td>
                {label} <span className="soft small">{unit}</span>
              </td>
              <td>{significant(current.gains[name], 4)}</td>
              <td>
                <b style={{ fontWeight: 600 }}>{significant(proposed.gains[name], 4)}</b>
              </td>
              <td>
                {current.gains[name] === 0
                  ? '–'
                  : `× ${(proposed.gains[name] / current.gains[name]).toFixed(2)}`}
              </td>
            </tr>
          ))}
        </tbody>
      </table>
      {current.structure !== proposed.structure && (
        <p style={{ margin: '10px 0 0' }}>
          Structure {current.structure} → <b>{proposed.structure}</b>
        </p>
      )}
    </Card>
  );
}

const FIGURES = [
  ['peakFollowingError', 'peak following error, mm', 3],
  ['rmsFollowingError', 'RMS following error, mm', 3],
  ['peakOutput', 'peak output, %', 1],
  ['saturatedPct', 'time at the limit, %', 1],
  ['maxSensitivity', 'largest sensitivity Ms', 2],
] as const;

export function WhatToExpect({ proposal: { expected, evidence } }: { proposal: Proposal }) {
  if (!expected) return null;
  const { before, after, worst, worstBefore, corners } = expected;
  const series = (figure: 'error' | 'output') => [
    { label: 'today', time: before.trace.time, values: before.trace[figure], dashed: true },
    ...(after ? [{ label: 'proposed', time: after.trace.time, values: after.trace[figure] }] : []),
  ];
  const { distance, duration } = evidence.move;
  return (
    <Card
      title="What to expect"
      sub={`simulated: its own ${distance} mm move in ${duration} s on the plant as identified`}
      aside="today dashed, proposed solid"
    >
      <MoveChart
        title="following error"
        unit="mm"
        series={series('error')}
        limit={{
          value: evidence.tolerances.followingError,
          label: `${evidence.tolerances.followingError} mm`,
        }}
      />
      <MoveChart
        title="output"
        unit="%"
        series={series('output')}
        limit={{ value: 100, label: '100 %' }}
        height={150}
        digits={1}
      />
      <div className="scroll-x">
        <table className="plain-table">
          <thead>
            <tr>
              <th>On that move</th>
              <th>do nothing</th>
              {worstBefore && <th>at worst</th>}
              <th>proposed</th>
              <th>at worst</th>
            </tr>
          </thead>
          <tbody>
            {FIGURES.map(([name, label, digits]) => {
              const cell = (value: number | null | undefined): string =>
                value == null ? '–' : value.toFixed(digits);
              return (
                <tr key={name}>
                  <td>{label}</td>
                  <td>{cell(before[name])}</td>
                  {worstBefore && <td>{cell(worstBefore[name])}</td>}
                  <td>
                    <b style={{ fontWeight: 600 }}>{cell(after?.[name])}</b>
                  </td>
                  <td>{cell(worst?.[name])}</td>
                </tr>
              );
            })}
          </tbody>
        </table>
      </div>
      <p className="soft small" style={{ margin: '8px 0 0' }}>
        At worst: the worst of the estimate and the corners of its 95 % region.{' '}
        {before.peakFollowingError <= evidence.tolerances.followingError
          ? 'Doing nothing keeps the following error within tolerance on this move.'
          : 'Doing nothing leaves the following error beyond tolerance on this move.'}
      </p>
      {corners && corners.length > 0 && <Corners corners={corners} />}
    </Card>
  );
}

type Corners = NonNullable<NonNullable<Proposal['expected']>['corners']>;

/** The same move wherever the plant may truly be. */
function Corners({ corners }: { corners: Corners }) {
  return (
    <details style={{ marginTop: 8 }}>
      <summary className="small">Every corner of the 95 % region</summary>
      <ScrollX label="Corners of the region">
        <table className="plain-table">
          <thead>
            <tr>
              <th>K, (mm/s)/%</th>
              <th>α, rad/s</th>
              <th>peak error, mm: nothing</th>
              <th>proposed</th>
              <th>saturated, %: nothing</th>
              <th>proposed</th>
              <th>Ms proposed</th>
            </tr>
          </thead>
          <tbody>
            {corners.map(({ gain, pole, before, after }) => (
              <tr key={`${gain} ${pole}`}>
                <td>{significant(gain, 4)}</td>
                <td>{significant(pole, 4)}</td>
                <td>{before.peakFollowingError.toFixed(3)}</td>
                <td>{after?.peakFollowingError.toFixed(3) ?? '–'}</td>
                <td>{before.saturatedPct.toFixed(1)}</td>
                <td>{after?.saturatedPct.toFixed(1) ?? '–'}</td>
                <td>{after?.maxSensitivity?.toFixed(2) ?? '–'}</td>
              </tr>
            ))}
          </tbody>
        </table>
      </ScrollX>
    </details>
  );
}

export function WhatBinds({ binding }: { binding: NonNullable<Proposal['binding']> }) {
  return (
    <Card title="What binds" sub={rulerText(binding)}>
      <LambdaRuler binding={binding} />
      {binding.waysOut.length > 0 && (
        <>
          <b style={{ fontWeight: 600 }}>Other ways</b>
          <ul style={{ margin: '4px 0 0', paddingLeft: 18 }}>
            {binding.waysOut.map((way) => (
              <li key={way}>{way}</li>
            ))}
          </ul>
        </>
      )}
    </Card>
  );
}

export function Trial({ trial }: { trial: NonNullable<Proposal['trial']> }) {
  const rows = [
    ['peakFollowingError', 'peak following error, mm', 3, '%'],
    ['rmsFollowingError', 'RMS following error, mm', 3, '%'],
    ['saturatedPct', 'time at the limit, %', 1, 'points'],
  ] as const;
  return (
    <Card
      title={`Trial: ${trial.verdict}`}
      sub={`the same moves before (${trial.moves.before}) and after (${trial.moves.after}); medians, change with its 95 % interval, rank test`}
    >
      <p style={{ margin: '0 0 10px' }}>{trial.sentence}</p>
      {trial.peakFollowingError && (
        <table className="plain-table">
          <thead>
            <tr>
              <th>Measured</th>
              <th>before</th>
              <th>after</th>
              <th>change</th>
              <th>p better</th>
              <th>p worse</th>
            </tr>
          </thead>
          <tbody>
            {rows.map(([name, label, digits, unit]) => {
              const figure = trial[name];
              return (
                figure && (
                  <tr key={name}>
                    <td>{label}</td>
                    <td>{figure.before.toFixed(digits)}</td>
                    <td>
                      <b style={{ fontWeight: 600 }}>{figure.after.toFixed(digits)}</b>
                    </td>
                    <td>{figure.change ? changeText(figure.change, unit) : '–'}</td>
                    <td>{probability(figure.pBetter)}</td>
                    <td>{probability(figure.pWorse)}</td>
                  </tr>
                )
              );
            })}
          </tbody>
        </table>
      )}
    </Card>
  );
}

const changeText = ({ value, low, high }: { value: number; low: number; high: number }, unit: string) => {
  const sign = (x: number): string =>
    x
      .toFixed(1)
      .replace(/^-(0\.0)$/, '$1')
      .replace('-', '−');
  return `${sign(value)} (${sign(low)} … ${sign(high)}) ${unit}`;
};

const probability = (p: number): string => (p < 0.001 ? '< 0.001' : p.toFixed(3));

export function Record({ proposal: { events, timeZone } }: { proposal: Proposal }) {
  return (
    <Card title="Record" sub="what was done, by whom, newest first">
      <ol className={classes.record}>
        {[...events].reverse().map((event, i) => (
          <li key={i}>
            <b style={{ fontWeight: 600 }}>{event.action}</b> by {event.by}{' '}
            <span className="soft small">
              <SiteTime at={event.at} timeZone={timeZone} />, version {event.version}
            </span>
            {event.note && <div className="small">{event.note}</div>}
          </li>
        ))}
      </ol>
    </Card>
  );
}
