import fc from 'fast-check';
import { expect, test } from 'vitest';
import { PART_BYTES, StateImage } from '../../src/telemetry/state-image.js';

const bytesOf = (arrays: Float64Array[]): Buffer =>
  Buffer.concat(arrays.map((array) => Buffer.from(array.buffer.slice(0))));

test('what was written part by part comes back to the bit, whatever changed between', () => {
  fc.assert(
    fc.property(
      fc.array(fc.array(fc.tuple(fc.nat(299), fc.double()), { maxLength: 5 }), { maxLength: 6 }),
      (rounds) => {
        const arrays = [new Float64Array(5), new Float64Array(300)];
        const image = new StateImage(arrays);
        const table = new Map<number, Buffer>();
        for (const changes of [[], ...rounds]) {
          for (const [at, value] of changes) arrays[1]![at] = value;
          image.writeChanged((part, bytes) => table.set(part, Buffer.from(bytes)));
        }
        const parts = [...table].sort(([a], [b]) => a - b).map(([, bytes]) => bytes);
        expect(Buffer.concat(parts)).toEqual(bytesOf(arrays));
        const copies = [new Float64Array(5), new Float64Array(300)];
        expect(new StateImage(copies).restore(parts)).toBe(true);
        expect(bytesOf(copies)).toEqual(bytesOf(arrays));
      },
    ),
    { numRuns: 200 },
  );
});

test('only parts whose bits changed are given; the sign of a zero is a bit', () => {
  const state = new Float64Array(300);
  const image = new StateImage([state]);
  const given = (): number[] => {
    const parts: number[] = [];
    image.writeChanged((part, bytes) => {
      parts.push(part);
      expect(bytes.byteLength).toBe(Math.min(PART_BYTES, 2400 - part * PART_BYTES));
    });
    return parts;
  };
  expect(given()).toEqual([0, 1, 2]);
  expect(given()).toEqual([]);
  state[150] = -0;
  expect(given()).toEqual([1]);
  state[0] = 1;
  state[299] = NaN;
  expect(given()).toEqual([0, 2]);
  expect(given()).toEqual([]);
  image.forget();
  expect(given()).toEqual([0, 1, 2]);
});

test('parts of another layout are refused and change nothing', () => {
  const image = new StateImage([new Float64Array(300)]);
  const parts: Buffer[] = [];
  image.writeChanged((_, bytes) => parts.push(Buffer.from(bytes)));
  const other = new Float64Array(301).fill(7);
  expect(new StateImage([other]).restore(parts)).toBe(false);
  expect(new StateImage([other]).restore(parts.slice(1))).toBe(false);
  expect(other.every((x) => x === 7)).toBe(true);
});
