import dayjs from 'dayjs';
import { roundMarks, TableView, useChartWidth, useReading } from './chart-frame';

const LEFT = 44;
const RIGHT = 8;
const TOP = 26;
const BOTTOM = 40;
const HEIGHT = 220;

interface Day {
  /** YYYY-MM-DD */
  date: string;
  alerts: number;
}

/** Alerts of each day as bars, with the published figures as lines where they are within reach. */
export function DayBars({
  days,
  published,
}: {
  days: readonly Day[];
  published: { acceptablePerDay: number; manageablePerDay: number };
}) {
  const { ref, width } = useChartWidth();
  const step = (width - LEFT - RIGHT) / days.length;
  const { at, reading } = useReading({
    count: days.length,
    nearest: (px) => Math.floor((px - LEFT) / step),
  });
  const most = Math.max(10, ...days.map(({ alerts }) => alerts));
  const high = most > published.acceptablePerDay / 2 ? Math.max(most, published.acceptablePerDay) : most;
  const y = (alerts: number): number => TOP + (HEIGHT - TOP - BOTTOM) * (1 - alerts / high);
  const x = (i: number): number => LEFT + i * step;
  const word = (date: string): string => dayjs(date).format('D MMM');
  const lines = [
    { value: published.acceptablePerDay, words: `acceptable: ${published.acceptablePerDay}` },
    { value: published.manageablePerDay, words: `the most: ${published.manageablePerDay}` },
  ].filter(({ value }) => value <= high);
  // A label every so many days: each takes about 60 px.
  const every = Math.max(1, Math.ceil(60 / step));
  const read = at === null ? null : days[at];
  return (
    <figure style={{ margin: 0 }} ref={ref}>
      <svg
        width={width}
        height={HEIGHT}
        style={{ display: 'block', maxWidth: '100%' }}
        role="img"
        aria-label={`Alerts a day over ${days.length} days, ${most} on the busiest; arrow keys read a day`}
        {...reading}
      >
        {roundMarks(0, high, 4).map((mark) => (
          <g key={mark}>
            <path d={`M${LEFT} ${y(mark)}H${width - RIGHT}`} stroke="var(--rule)" />
            <text x={LEFT - 6} y={y(mark) + 4} fontSize="12" textAnchor="end" fill="var(--soft)">
              {mark}
            </text>
          </g>
        ))}
        {days.map(({ date, alerts }, i) => (
          <rect
            key={date}
            x={x(i) + step * 0.12}
            width={Math.max(1, step * 0.76)}
            y={y(alerts)}
            height={y(0) - y(alerts)}
            fill={
              alerts > published.manageablePerDay
                ? 'var(--out)'
                : alerts > published.acceptablePerDay
                  ? 'var(--drift)'
                  : 'var(--soft)'
            }
            fillOpacity={at === i ? 1 : 0.75}
          />
        ))}
        {lines.map(({ value, words }) => (
          <g key={value}>
            <path
              d={`M${LEFT} ${y(value)}H${width - RIGHT}`}
              stroke="var(--ink)"
              strokeDasharray="5 4"
              fill="none"
            />
            <text x={width - RIGHT} y={y(value) - 4} fontSize="12" textAnchor="end" fill="var(--ink)">
              {words}
            </text>
          </g>
        ))}
        {days.map(
          ({ date }, i) =>
            i % every === 0 && (
              <text
                key={date}
                x={x(i) + step / 2}
                y={HEIGHT - BOTTOM + 16}
                fontSize="12"
                textAnchor="middle"
                fill="var(--soft)"
              >
                {word(date)}
              </text>
            ),
        )}
        <text x={(LEFT + width) / 2} y={HEIGHT - 6} fontSize="12" textAnchor="middle" fill="var(--soft)">
          day
        </text>
        <text x={4} y={14} fontSize="12" fill="var(--soft)">
          alerts a day
        </text>
        {read && (
          <text x={width - RIGHT} y={14} fontSize="12.5" textAnchor="end" fontWeight="600" fill="var(--ink)">
            {word(read.date)}: {read.alerts}
          </text>
        )}
      </svg>
      <div role="status" className="visually-hidden">
        {read && `${word(read.date)}: ${read.alerts} alerts`}
      </div>
      <TableView
        columns={['Day', 'Alerts']}
        rows={() => days.map(({ date, alerts }) => [word(date), String(alerts)])}
      />
    </figure>
  );
}
