import { NumberInput, SegmentedControl, Select, Slider, Switch } from '@mantine/core';
import type { KeyboardEvent } from 'react';
import type { Schemas } from '../../api/client';
import { LambdaRuler, LIMIT_WORDS, MARGIN, rulerText } from '../../components/lambda-ruler';
import { significant } from '../../components/quantity';
import type { Axis } from '../fleet/fleet-api';
import { KINDS, STRUCTURES, type BenchState, type Kind } from './bench-state';
import classes from './bench.module.css';

type Binding = Schemas['BindingDto'];

/** Places of the slider over the ruler's logarithmic range. */
const PLACES = 1000;
/** What one arrow key and one page key move, places. */
const FINE = 2;
const COARSE = 40;
/** Ruler about the axis's λ until the limits are known. */
const USUAL_RANGE = 6;

/** What can be chosen on the bench; λ on the ruler that names what binds. */
export function BenchControls({
  axis,
  state,
  binding,
  onChange,
}: {
  axis: Axis;
  state: BenchState;
  binding: Binding | undefined;
  onChange: (change: Partial<BenchState>) => void;
}) {
  const range = rangeOf(axis, state, binding);
  const span = Math.log(range.to / range.from);
  const place = Math.round((PLACES * Math.log(state.lambda / range.from)) / span);
  const lambdaAt = (at: number): number =>
    Number((range.from * Math.exp((span * at) / PLACES)).toPrecision(4));
  const move = (by: number): void =>
    onChange({ lambda: lambdaAt(Math.min(PLACES, Math.max(0, place + by))) });
  const onKeyDown = (event: KeyboardEvent): void => {
    const by = { PageUp: COARSE, PageDown: -COARSE }[event.key];
    if (by === undefined) return;
    event.preventDefault();
    move(by);
  };
  return (
    <div className={classes.controls}>
      <div onKeyDownCapture={onKeyDown}>
        {binding && <LambdaRuler binding={{ ...binding, lambda: state.lambda, kept: false }} range={range} />}
        <div style={{ margin: `0 ${MARGIN}px` }}>
          <Slider
            thumbLabel="λ in rad/s, logarithmic; arrow keys fine, page keys coarse"
            min={0}
            max={PLACES}
            step={FINE}
            value={place}
            label={null}
            onChange={(at) => onChange({ lambda: lambdaAt(at) })}
            thumbProps={{ 'aria-valuetext': `${significant(state.lambda)} rad/s` }}
          />
        </div>
        <p className="small" role="status" style={{ minHeight: 38, margin: '10px 0 0' }}>
          {binding ? bindingText(state.lambda, binding) : 'Working out which λ the limits allow …'}
        </p>
      </div>
      <div className={classes.choices}>
        <NumberInput
          label="λ, rad/s"
          description={`${KINDS[state.kind]}; commissioned at ${significant(axis.lambda)}`}
          min={0.01}
          max={10_000}
          step={1}
          decimalScale={3}
          value={Number(state.lambda.toPrecision(5))}
          onChange={(value) => Number(value) > 0 && onChange({ lambda: Number(value) })}
        />
        <Select
          label="Pole pattern"
          description="where the three poles go"
          allowDeselect={false}
          data={Object.entries(KINDS).map(([value, label]) => ({ value, label }))}
          value={state.kind}
          onChange={(value) => value && onChange({ kind: value as Kind })}
        />
        {state.kind === 'real' && (
          <NumberInput
            label="Spread"
            description="poles at λ/spread, λ, λ·spread"
            min={1}
            max={10}
            step={0.1}
            decimalScale={3}
            value={state.spread}
            onChange={(value) => Number(value) >= 1 && onChange({ spread: Number(value) })}
          />
        )}
        {state.kind === 'pair' && (
          <NumberInput
            label="Damping ζ of the pair"
            description="real pole and pair at λ"
            min={0.05}
            max={2}
            step={0.05}
            decimalScale={3}
            value={state.zeta}
            onChange={(value) => Number(value) >= 0.05 && onChange({ zeta: Number(value) })}
          />
        )}
        <div>
          <div className="small soft">Structure</div>
          <SegmentedControl
            aria-label="Structure"
            data={[...STRUCTURES]}
            value={state.structure}
            onChange={(value) => onChange({ structure: value as BenchState['structure'] })}
          />
        </div>
        <div>
          <div className="small soft">Plant</div>
          <SegmentedControl
            aria-label="Plant"
            data={[
              { value: 'identified', label: 'as identified', disabled: !axis.estimate },
              { value: 'baseline', label: 'baseline', disabled: !axis.baseline },
            ]}
            value={state.plant}
            onChange={(value) => onChange({ plant: value as BenchState['plant'] })}
          />
        </div>
        <Switch
          label="Feed-forward"
          description="Kv and Ka in full"
          checked={state.feedForward}
          onChange={(event) => onChange({ feedForward: event.currentTarget.checked })}
        />
      </div>
    </div>
  );
}

function rangeOf(
  axis: Axis,
  { lambda }: BenchState,
  binding: Binding | undefined,
): { from: number; to: number } {
  const low = binding?.searched.low ?? axis.lambda / USUAL_RANGE;
  const high = binding?.searched.high ?? axis.lambda * USUAL_RANGE;
  return { from: Math.min(low, lambda), to: Math.max(high, lambda) };
}

/** Where λ stands against the limits, and which one it breaks or meets first. */
function bindingText(lambda: number, binding: Binding): string {
  const { allowed, upper, lower } = binding;
  if (!allowed) return rulerText(binding);
  const between = `allowed from ${significant(allowed.low)} to ${significant(allowed.high)} rad/s`;
  const names = (end: Binding['upper']): string => (end ? LIMIT_WORDS[end.name] : 'the searched range');
  if (lambda > allowed.high * 1.0005)
    return `λ = ${significant(lambda)} is too fast: ${names(upper)} forbids it; ${between}.`;
  if (lambda < allowed.low * 0.9995)
    return `λ = ${significant(lambda)} is too slow: ${names(lower)} forbids it; ${between}.`;
  return `λ = ${significant(lambda)} is ${between}: ${names(lower)} binds below, ${names(upper)} above.`;
}
