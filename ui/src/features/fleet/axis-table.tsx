import { memo, useRef } from 'react';
import { Link } from 'react-router-dom';
import { significant } from '../../components/quantity';
import { ScrollX } from '../../components/scroll-x';
import { StateWord } from '../../components/state-glyph';
import classes from './axis-table.module.css';
import type { Axis } from './fleet-api';
import { useTile, type LiveTiles } from './live-tiles';
import { useNear } from './use-near';

/** The fleet, dense: one line an axis. */
export function AxisTable({ axes, tiles }: { axes: Axis[]; tiles: LiveTiles }) {
  return (
    <ScrollX label="Axes, worst first" className="card">
      <table className={`plain-table ${classes.table}`}>
        <thead>
          <tr>
            <th className={classes.axis}>Axis</th>
            <th className={classes.state}>State</th>
            <th>Peak error, mm</th>
            <th>allowed</th>
            <th>At limit, %</th>
            <th>K, (mm/s)/%</th>
            <th>K₀</th>
            <th>α, rad/s</th>
            <th>α₀</th>
            <th className={classes.why}>Why</th>
          </tr>
        </thead>
        <tbody>
          {axes.map((axis) => (
            <Row key={axis.id} axis={axis} tiles={tiles} />
          ))}
        </tbody>
      </table>
    </ScrollX>
  );
}

const Row = memo(function Row({ axis, tiles }: { axis: Axis; tiles: LiveTiles }) {
  const row = useRef<HTMLTableRowElement>(null);
  const { tile } = useTile(tiles, axis.id, useNear(row));
  const indicators = tile ? tile.indicators : axis.indicators;
  const estimate = tile?.estimate ?? axis.estimate;
  const number = (value: number | null | undefined): string => (value == null ? '–' : significant(value));
  return (
    <tr ref={row}>
      <td>
        <Link to={`/axes/${axis.id}`} style={{ fontWeight: 600, color: 'var(--ink)' }}>
          {axis.tag}
        </Link>{' '}
        <span className="soft small">{axis.siteName}</span>
      </td>
      <td style={{ textAlign: 'left' }}>
        <StateWord state={tile?.state ?? axis.state} />
      </td>
      <td>{number(indicators?.peakFollowingError)}</td>
      <td className="soft">{axis.tolerances.followingError}</td>
      <td>{indicators?.saturatedPct == null ? '–' : indicators.saturatedPct.toFixed(1)}</td>
      <td>{number(estimate?.gain.value)}</td>
      <td className="soft">{number(axis.baseline?.gain)}</td>
      <td>{number(estimate?.pole.value)}</td>
      <td className="soft">{number(axis.baseline?.pole)}</td>
      <td style={{ textAlign: 'left' }} className="small soft">
        {tile?.stateReason ?? axis.stateReason}
      </td>
    </tr>
  );
});
