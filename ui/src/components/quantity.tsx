/** Decimals that the width of a 95 % interval supports: two significant digits of its half. */
export function decimalsFor(half: number): number {
  return half > 0 && Number.isFinite(half) ? Math.min(6, Math.max(0, 1 - Math.floor(Math.log10(half)))) : 2;
}

/** Significant digits for a value without an interval. */
export function significant(value: number, digits = 3): string {
  if (value === 0) return '0';
  const decimals = Math.min(6, Math.max(0, digits - 1 - Math.floor(Math.log10(Math.abs(value)))));
  return value.toFixed(decimals).replace('-', '−');
}

/** A value with its half interval and unit: 2.60 ± 0.07 rad/s. */
export function Quantity({
  value,
  low,
  high,
  unit,
}: {
  value: number;
  low?: number;
  high?: number;
  /** Left out where the heading names it. */
  unit?: string;
}) {
  const half = low !== undefined && high !== undefined ? (high - low) / 2 : null;
  return (
    <span className="nowrap">
      {half === null
        ? significant(value)
        : `${value.toFixed(decimalsFor(half)).replace('-', '−')} ± ${half.toFixed(decimalsFor(half))}`}
      {unit && <span className="soft small"> {unit}</span>}
    </span>
  );
}
