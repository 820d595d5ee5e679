import { expect, test } from 'vitest';
import { GatewayWatch } from '../../src/telemetry/gateway-progress.js';

const T0 = 1.7e12; // ms, a whole second

test('rates are the mean of the last ten whole seconds', () => {
  const watch = new GatewayWatch();
  for (let ms = 0; ms < 30_000; ms += 100) watch.taken(T0 + ms, 500, 1000 * (T0 + ms));
  expect(watch.rates(T0 + 30_000)).toEqual({ messages: 10, samples: 5_000 });
  // Five seconds of silence: half of it is left; after ten nothing.
  expect(watch.rates(T0 + 35_000)).toEqual({ messages: 5, samples: 2_500 });
  expect(watch.rates(T0 + 41_000)).toEqual({ messages: 0, samples: 0 });
});

test('the clock offset is that of the least delayed message of the last minute', () => {
  const watch = new GatewayWatch();
  expect(watch.clockOffset(T0)).toBeNull();
  expect(watch.lag(T0)).toBeNull();
  watch.taken(T0, 10, 1000 * (T0 - 5_000));
  watch.taken(T0 + 100, 10, 1000 * (T0 - 150));
  watch.taken(T0 + 2_000, 10, 1000 * (T0 - 7_000));
  expect(watch.clockOffset(T0 + 2_000)).toBeCloseTo(-0.25, 9);
  expect(watch.lag(T0 + 2_000)).toBeCloseTo(9, 9);
  expect(watch.clockOffset(T0 + 61_000)).toBeCloseTo(-9, 9);
  expect(watch.clockOffset(T0 + 63_000)).toBeNull();
});
