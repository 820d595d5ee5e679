import { SegmentedControl } from '@mantine/core';
import { useQuery } from '@tanstack/react-query';
import { useCallback, useMemo, useState } from 'react';
import { Link, useParams } from 'react-router-dom';
import { useLiveValues, type LiveTile } from '../../api/live';
import { DriftPlot } from '../../charts/drift-plot';
import { HistoryChart, type HistoryPoint } from '../../charts/history-chart';
import { LiveTraceChart } from '../../charts/live-trace';
import { TraceStore, traceRate } from '../../charts/trace-store';
import { Card } from '../../components/card';
import { ErrorState, Waiting } from '../../components/notices';
import { Quantity, significant } from '../../components/quantity';
import { ScrollX } from '../../components/scroll-x';
import { SiteTime } from '../../components/site-time';
import { StateEdge } from '../../components/state-edge';
import { StateWord } from '../../components/state-glyph';
import { STATE_TINT } from '../../components/states';
import type { Axis } from '../fleet/fleet-api';
import { AxisActions } from './axis-actions';
import { AxisCaptures } from './axis-captures';
import { axisQuery, estimatesQuery, SPANS, type Span } from './axis-api';
import classes from './axis-page.module.css';
import { LambdaCard } from './lambda-card';
import { LoopCard } from './loop-card';
import { Tunings } from './tunings';
import { WhatHappened } from './what-happened';

export function Component() {
  const id = Number(useParams().id);
  const { data: axis, error, isPending, refetch } = useQuery(axisQuery(id));
  if (error && !axis) return <ErrorState error={error} what={`Axis ${id}`} onRetry={() => void refetch()} />;
  if (isPending) return <Waiting heights={[110, 440, 300]} />;
  return <AxisView key={id} axis={axis} />;
}

function AxisView({ axis }: { axis: Axis }) {
  const [tile, setTile] = useState<LiveTile | null>(null);
  const [store] = useState(() => new TraceStore());
  useLiveValues(
    useMemo(() => ({ axes: [axis.id], trace: axis.id, traceRate: traceRate() }), [axis.id]),
    useCallback(
      ({ tiles, trace }) => {
        const own = tiles.find(({ id }) => id === axis.id);
        if (own) setTile(own);
        if (trace?.axisId === axis.id) store.push(trace);
      },
      [axis.id, store],
    ),
  );
  const state = tile?.state ?? axis.state;
  const indicators = tile ? tile.indicators : axis.indicators;
  return (
    <>
      <title>{`${axis.tag} · Polewright`}</title>
      <div className="soft small">
        <Link to="/">Fleet</Link> / {axis.siteName} / {axis.machineName}
      </div>
      <section
        className={`card ${classes.head}`}
        style={{ background: STATE_TINT[state] }}
        data-state={state}
      >
        <StateEdge state={state} />
        <div>
          <h1>{axis.tag}</h1>
          <div className="soft">
            {axis.name}, {axis.actuator}, {axis.structure} at λ {axis.lambda.toFixed(1)} rad/s
          </div>
        </div>
        <div style={{ flex: '1 1 320px' }}>
          <StateWord state={state} />{' '}
          {axis.stateSince && (
            <span className="soft small">
              since <SiteTime at={axis.stateSince} timeZone={axis.timeZone} />
            </span>
          )}
          <div>{tile?.stateReason ?? axis.stateReason}</div>
          {axis.openProposal && (
            <Link to={`/proposals/${axis.openProposal.id}`}>
              Retune {axis.openProposal.id}, {axis.openProposal.state}
            </Link>
          )}
        </div>
        <AxisActions axis={axis} state={state} />
      </section>
      <div className={classes.grid}>
        <div className={classes.past}>
          <Card
            title="Live"
            sub={`last 20 s, thinned by extremes; sampled every ${axis.sampleTime * 1000} ms`}
            aside={
              indicators &&
              `last minute: peak error ${indicators.peakFollowingError === null ? '–' : significant(indicators.peakFollowingError)} of ${axis.tolerances.followingError} mm, at the limit ${indicators.saturatedPct === null ? '–' : indicators.saturatedPct.toFixed(1)} % of moving time`
            }
          >
            <LiveTraceChart store={store} timeZone={axis.timeZone} />
          </Card>
          <div className={classes.histories}>
            <Histories axis={axis} />
          </div>
          <WhatHappened axis={axis} />
          <Tunings axis={axis} />
          <AxisCaptures axis={axis} />
        </div>
        <div className={classes.present}>
          <PlantCard axis={axis} tile={tile} />
          <LambdaCard axis={axis} />
          <LoopCard axis={axis} />
        </div>
      </div>
    </>
  );
}

function PlantCard({ axis, tile }: { axis: Axis; tile: LiveTile | null }) {
  const { baseline, tolerances } = axis;
  const estimate = axis.estimate && tile?.estimate ? { ...axis.estimate, ...tile.estimate } : axis.estimate;
  return (
    <Card
      title="Plant"
      sub={
        estimate
          ? `from ${estimate.movingSeconds.toFixed(0)} s of production moves, ${estimate.verdict}`
          : 'no estimate yet'
      }
    >
      <div style={{ display: 'flex', gap: 20, flexWrap: 'wrap' }}>
        <DriftPlot
          size={168}
          state={axis.state}
          tolerances={tolerances}
          trail={axis.trail}
          point={
            estimate && baseline
              ? {
                  gainRatio: estimate.gain.value / baseline.gain,
                  poleRatio: estimate.pole.value / baseline.pole,
                }
              : null
          }
          {...(estimate && { covariance: estimate.lnCovariance })}
        />
        {estimate && (
          <div style={{ flex: '1 1 300px', minWidth: 0 }}>
            <ScrollX label="Plant, now and baseline">
              <table className="plain-table">
                <thead>
                  <tr>
                    <th>Quantity</th>
                    <th>now</th>
                    <th>baseline</th>
                  </tr>
                </thead>
                <tbody>
                  <tr>
                    <td>
                      gain K, <span className="soft small">(mm/s)/%</span>
                    </td>
                    <td>
                      <Quantity {...estimate.gain} />
                    </td>
                    <td>{baseline ? significant(baseline.gain) : '–'}</td>
                  </tr>
                  {estimate.gainForward && estimate.gainReverse && (
                    <tr>
                      <td>
                        K⁺ / K⁻, <span className="soft small">(mm/s)/%</span>
                      </td>
                      <td>
                        {significant(estimate.gainForward.value)} / {significant(estimate.gainReverse.value)}
                      </td>
                      <td />
                    </tr>
                  )}
                  <tr>
                    <td>
                      pole α, <span className="soft small">rad/s</span>
                    </td>
                    <td>
                      <Quantity {...estimate.pole} />
                    </td>
                    <td>{baseline ? significant(baseline.pole) : '–'}</td>
                  </tr>
                  <tr>
                    <td>
                      dry friction f, <span className="soft small">%</span>
                    </td>
                    <td>
                      <Quantity {...estimate.coulomb} />
                    </td>
                    <td />
                  </tr>
                  <tr>
                    <td>
                      bias b, <span className="soft small">%</span>
                    </td>
                    <td>
                      <Quantity {...estimate.bias} />
                    </td>
                    <td />
                  </tr>
                  <tr>
                    <td>
                      dead time τ, <span className="soft small">ms</span>
                    </td>
                    <td>{(estimate.deadTime * 1000).toFixed(1)}</td>
                    <td />
                  </tr>
                  <tr>
                    <td>
                      fit of the velocity, <span className="soft small">%</span>
                    </td>
                    <td>{estimate.fitPct.toFixed(1)}</td>
                    <td />
                  </tr>
                </tbody>
              </table>
            </ScrollX>
          </div>
        )}
      </div>
      <p className="small soft" style={{ margin: '10px 0 0' }}>
        Box: tolerance ±{tolerances.gainPct} % on K (across), ±{tolerances.polePct} % on α (up). Ellipse: 95
        %.
      </p>
      {estimate?.remarks.map((remark) => (
        <p key={remark} className="small" style={{ margin: '4px 0 0' }}>
          {remark}
        </p>
      ))}
    </Card>
  );
}

function Histories({ axis }: { axis: Axis }) {
  const [span, setSpan] = useState<Span>('1 h');
  const { data, error, refetch } = useQuery(estimatesQuery(axis.id, span));
  const items = data?.items ?? [];
  const of = (quantity: 'gain' | 'pole' | 'coulomb'): HistoryPoint[] =>
    items.map((item) => {
      const chart = quantity === 'coulomb' ? null : item.chart?.[quantity];
      const base = quantity === 'coulomb' ? null : axis.baseline?.[quantity];
      return {
        at: item.at,
        ...item[quantity],
        ...(chart &&
          base && {
            ewma: chart.ewma * base,
            limitLow: chart.low === null ? null : chart.low * base,
            limitHigh: chart.high === null ? null : chart.high * base,
            drifted: chart.state === 'drifted',
          }),
      };
    });
  return (
    <Card
      title="How the plant has been"
      sub="estimates with 95 % intervals; control chart by EWMA and CUSUM"
      aside={
        <SegmentedControl
          size="xs"
          aria-label="Span"
          value={span}
          onChange={(value) => setSpan(value as Span)}
          data={Object.keys(SPANS)}
        />
      }
    >
      {error && !data ? (
        <ErrorState error={error} what="The history" onRetry={() => void refetch()} />
      ) : (
        <div style={{ display: 'grid', gap: 14 }}>
          <HistoryChart
            title="gain K"
            unit="(mm/s)/%"
            points={of('gain')}
            baseline={axis.baseline?.gain ?? null}
            tolerancePct={axis.tolerances.gainPct}
            timeZone={axis.timeZone}
          />
          <HistoryChart
            title="pole α"
            unit="rad/s"
            points={of('pole')}
            baseline={axis.baseline?.pole ?? null}
            tolerancePct={axis.tolerances.polePct}
            timeZone={axis.timeZone}
          />
          <HistoryChart
            title="dry friction f"
            unit="%"
            points={of('coulomb')}
            baseline={null}
            timeZone={axis.timeZone}
            height={140}
          />
        </div>
      )}
    </Card>
  );
}
