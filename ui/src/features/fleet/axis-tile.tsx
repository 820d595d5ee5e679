import { memo, useRef } from 'react';
import { Link } from 'react-router-dom';
import type { StripPoint } from '../../api/live';
import { DriftPlot } from '../../charts/drift-plot';
import { ErrorStrip, OutputStrip } from '../../charts/strips';
import { StateEdge } from '../../components/state-edge';
import { STATE_COLOUR, STATE_TINT, STATE_WORDS } from '../../components/states';
import classes from './axis-tile.module.css';
import type { Axis } from './fleet-api';
import { useTile, type LiveTiles } from './live-tiles';
import { useNear } from './use-near';

const NOT_DRAWN: readonly StripPoint[] = [];

/** Says at arm's length whether to come closer. Never blinks. */
export const AxisTile = memo(function AxisTile({ axis, tiles }: { axis: Axis; tiles: LiveTiles }) {
  const ref = useRef<HTMLElement>(null);
  const near = useNear(ref);
  const { tile, strip } = useTile(tiles, axis.id, near);
  const state = tile?.state ?? axis.state;
  const reason = tile?.stateReason ?? axis.stateReason;
  const indicators = tile ? tile.indicators : axis.indicators;
  const estimate = tile?.estimate ?? axis.estimate;
  const silent = state === 'no-signal';
  // What a silent axis did before is not what it did in the last two minutes.
  const drawn = near && !silent ? strip : NOT_DRAWN;
  const colour = state === 'in-maintenance' ? 'var(--ink)' : STATE_COLOUR[state];
  const lead = reason.slice(0, reason.search(/[.!?](\s|$)/) + 1) || reason;
  const alert = axis.openAlerts.find(({ state: of }) => of === 'unacknowledged') ?? axis.openAlerts[0];
  return (
    <article
      ref={ref}
      className={classes.tile}
      style={{ background: STATE_TINT[state] }}
      data-state={state}
      data-tag={axis.tag}
    >
      <StateEdge state={state} />
      <div className={classes.head}>
        <div style={{ minWidth: 0 }}>
          <Link to={`/axes/${axis.id}`} className={classes.tag}>
            {axis.tag}
          </Link>
          <div className={classes.name}>
            {axis.name} · {axis.siteName}
          </div>
        </div>
        <div className={classes.state} style={{ color: STATE_COLOUR[state] }}>
          {STATE_WORDS[state]}
        </div>
      </div>
      <div className={classes.row}>
        {near ? (
          <DriftPlot
            state={state}
            tolerances={axis.tolerances}
            trail={axis.trail}
            point={
              estimate && axis.baseline
                ? {
                    gainRatio: estimate.gain.value / axis.baseline.gain,
                    poleRatio: estimate.pole.value / axis.baseline.pole,
                  }
                : null
            }
            {...(estimate && { covariance: estimate.lnCovariance })}
          />
        ) : (
          <div className={classes.plotPlace} />
        )}
        <div className={classes.strips}>
          <div className={classes.label}>
            <span>error</span>
            <b>
              {silent || indicators?.peakFollowingError == null
                ? silent
                  ? '–'
                  : 'standing'
                : `${millimetres(indicators.peakFollowingError)} of ${axis.tolerances.followingError} mm`}
            </b>
          </div>
          <ErrorStrip points={drawn} colour={colour} tolerance={axis.tolerances.followingError} />
          <div className={classes.label}>
            <span>at limit</span>
            <b>
              {silent || indicators?.saturatedPct == null ? '–' : `${indicators.saturatedPct.toFixed(1)} %`}
            </b>
          </div>
          <OutputStrip points={drawn} colour={colour} />
        </div>
      </div>
      <div className={classes.why}>
        <b>{lead}</b> {reason.slice(lead.length)}{' '}
        {axis.openProposal && (
          <Link to={`/proposals/${axis.openProposal.id}`}>
            Retune {axis.openProposal.id} {axis.openProposal.state}
          </Link>
        )}
        {!axis.openProposal && alert && (
          <Link to={`/alerts/${alert.id}`}>Alert {alert.state.replaceAll('-', ' ')}</Link>
        )}
      </div>
    </article>
  );
});

const millimetres = (value: number): string => (value < 0.1 ? value.toFixed(3) : value.toFixed(2));
