import { Button, NumberInput, SegmentedControl } from '@mantine/core';
import { useQuery } from '@tanstack/react-query';
import type { ReactNode } from 'react';
import { Card } from '../../components/card';
import { ErrorState, Waiting } from '../../components/notices';
import type { Axis } from '../fleet/fleet-api';
import { limitsQuery, plantOf, todayQuery, triedQuery } from './bench-api';
import { BenchBode, BenchMoves, BenchPoles } from './bench-charts';
import { BenchControls } from './bench-controls';
import { BenchFigures } from './bench-figures';
import type { BenchState } from './bench-state';
import classes from './bench.module.css';

/**
 * The bench: λ, pattern and structure against the plant, today's gains dashed and the tried ones solid. It holds no
 * state of its own and reaches no machine; whoever shows it keeps `state` and decides what comes of it (`actions`).
 */
export function Bench({
  axis,
  state,
  onChange,
  actions,
}: {
  axis: Axis;
  state: BenchState;
  onChange: (change: Partial<BenchState>) => void;
  actions?: ReactNode;
}) {
  const plant = plantOf(axis, state.plant);
  const tried = useQuery(triedQuery(axis, plant, state));
  const today = useQuery(todayQuery(axis, plant, state));
  const limits = useQuery(limitsQuery(axis, plant, state));
  if (!plant)
    return (
      <p className="soft">
        The bench needs a plant: let the axis run until it is identified, or give it a baseline.
      </p>
    );
  const answer = tried.data;
  return (
    <div className={classes.bench}>
      <Card title="Poles" sub="gains follow from them; nothing here reaches the machine" aside={actions}>
        <BenchControls axis={axis} state={state} binding={limits.data} onChange={onChange} />
        {limits.error && (
          <p role="alert" style={{ color: 'var(--out)' }}>
            The limits could not be worked out: {limits.error.message}
          </p>
        )}
      </Card>
      {tried.error && (
        <ErrorState error={tried.error} what="The tried loop" onRetry={() => void tried.refetch()} />
      )}
      {!answer ? (
        !tried.error && <Waiting heights={[300, 300]} />
      ) : (
        <div className={classes.results} aria-busy={tried.isPlaceholderData}>
          <div className={classes.column}>
            <Card title="In words">
              <ul style={{ margin: 0, paddingLeft: 18 }}>
                {answer.remarks?.map((remark) => (
                  <li key={remark} style={{ marginBottom: 6 }}>
                    {remark}
                  </li>
                ))}
              </ul>
            </Card>
            <Card title="Figures" sub="on the same plant and the same move">
              <BenchFigures today={today.data} tried={answer} />
            </Card>
          </div>
          <div className={classes.column}>
            <Card title="Poles and zeros" sub="closed loop, in s">
              <BenchPoles today={today.data} tried={answer} />
            </Card>
            <Card title="Frequency response" sub="continuous loop, delays left out">
              <BenchBode today={today.data} tried={answer} moveHz={1 / axis.move.duration} />
            </Card>
          </div>
          <Card
            title={state.profile === 'move' ? 'The axis’s own move' : 'A step'}
            sub={
              state.profile === 'move'
                ? `${axis.move.distance} mm in ${axis.move.duration} s, raised cosine, with friction, bias, dead time and resolution as identified`
                : 'from a held axis, with friction, bias, dead time and resolution as identified'
            }
            aside={
              <div className={classes.profile}>
                {state.profile === 'step' && (
                  <NumberInput
                    aria-label="Step, mm"
                    size="xs"
                    w={110}
                    suffix=" mm"
                    min={0.001}
                    max={10_000}
                    decimalScale={3}
                    value={state.step}
                    onChange={(value) => Number(value) > 0 && onChange({ step: Number(value) })}
                  />
                )}
                <SegmentedControl
                  size="xs"
                  aria-label="Profile"
                  data={[
                    { value: 'move', label: 'own move' },
                    { value: 'step', label: 'step' },
                  ]}
                  value={state.profile}
                  onChange={(value) => onChange({ profile: value as BenchState['profile'] })}
                />
              </div>
            }
          >
            {answer.move && (
              <BenchMoves
                today={today.data?.move?.trace}
                tried={answer.move.trace}
                {...(state.profile === 'move' && { tolerance: axis.tolerances.followingError })}
              />
            )}
          </Card>
        </div>
      )}
    </div>
  );
}

/** Puts the bench back to how the axis runs. */
export function ResetBench({ onReset }: { onReset: () => void }) {
  return (
    <Button variant="default" size="xs" onClick={onReset}>
      As it runs today
    </Button>
  );
}
