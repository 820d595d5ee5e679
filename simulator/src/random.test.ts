import { expect, it } from 'vitest';
import { randomFrom } from './random.js';

it('gives the same numbers for the same seed and stream, others otherwise', () => {
  const numbers = (seed: number, stream: string): number[] => {
    const random = randomFrom(seed, stream);
    return Array.from({ length: 20 }, () => random.uniform());
  };
  expect(numbers(1, 'a')).toEqual(numbers(1, 'a'));
  expect(numbers(1, 'a')).not.toEqual(numbers(2, 'a'));
  expect(numbers(1, 'a')).not.toEqual(numbers(1, 'b'));
});

it('gives normal numbers with mean 0, variance 1 and kurtosis 3', () => {
  const random = randomFrom(9);
  const n = 200_000;
  let [sum, squares, fourths] = [0, 0, 0];
  for (let i = 0; i < n; i++) {
    const x = random.normal();
    sum += x;
    squares += x * x;
    fourths += x ** 4;
  }
  // four standard errors of each
  expect(Math.abs(sum / n)).toBeLessThan(4 / Math.sqrt(n));
  expect(Math.abs(squares / n - 1)).toBeLessThan(4 * Math.sqrt(2 / n));
  expect(Math.abs(fourths / n - 3)).toBeLessThan(4 * Math.sqrt(96 / n));
});
