import { expect, test } from 'vitest';
import { FairQueue } from '../../src/telemetry/fair-queue.js';

interface Item {
  lane: number;
  bytes: number;
  nth: number;
}
const BOUNDS = { laneBytes: 1e6, totalBytes: 4e6, quantum: 20e3 };
const queueOf = (bounds = BOUNDS): FairQueue<Item> => new FairQueue<Item>(bounds);
const fill = (queue: FairQueue<Item>, lane: number, bytes: number, most: number): number => {
  let nth = 0;
  while (nth < most && queue.offer(lane, { lane, bytes, nth })) nth++;
  return nth;
};
const drain = (queue: FairQueue<Item>): Item[] => {
  const items: Item[] = [];
  for (let item = queue.next(); item; item = queue.next()) items.push(item);
  return items;
};

test('within a lane nothing changes places, and nothing is lost', () => {
  const queue = queueOf();
  const put = [1, 2, 3].map((lane) => fill(queue, lane, 700 * lane, 400));
  const out = drain(queue);
  expect(out).toHaveLength(put.reduce((sum, n) => sum + n, 0));
  for (const lane of [1, 2, 3])
    expect(out.filter((item) => item.lane === lane).map(({ nth }) => nth)).toEqual(
      Array.from({ length: put[lane - 1]! }, (_, k) => k),
    );
  expect(queue).toMatchObject({ bytes: 0, size: 0 });
});

test('a flooded lane delays another’s message by no more than one round', () => {
  const queue = queueOf();
  fill(queue, 1, 10e3, 1_000);
  queue.offer(2, { lane: 2, bytes: 10e3, nth: 0 });
  const before = drain(queue).findIndex(({ lane }) => lane === 2);
  expect(before).toBeLessThanOrEqual(2);
});

test('lanes get the same bytes, however large their messages are', () => {
  const queue = queueOf();
  fill(queue, 1, 90e3, 1_000);
  fill(queue, 2, 900, 1_000);
  const got = [0, 0, 0];
  // Half a lane each: both still have something to give.
  while (got[1]! + got[2]! < 800e3) {
    const { lane, bytes } = queue.next()!;
    got[lane]! += bytes + 256;
  }
  expect(Math.abs(got[1]! - got[2]!)).toBeLessThan(200e3);
});

test('a full lane refuses, the others go on taking', () => {
  const queue = queueOf();
  const taken = fill(queue, 1, 10e3, 1_000);
  expect(taken).toBe(97); // 97 × (10 000 + 256) bytes fit into a million
  expect(queue.bytesOf(1)).toBeLessThanOrEqual(BOUNDS.laneBytes);
  expect(queue.offer(2, { lane: 2, bytes: 10e3, nth: 0 })).toBe(true);
  queue.nextOf(1);
  expect(queue.offer(1, { lane: 1, bytes: 10e3, nth: 97 })).toBe(true);
});

test('when all together are too many each lane holds one message, and a new one gets in', () => {
  const queue = queueOf({ ...BOUNDS, totalBytes: 2e6 });
  const taken = [1, 2, 3, 4].map((lane) => fill(queue, lane, 10e3, 1_000));
  expect(taken).toEqual([97, 97, 1, 1]);
  // Room that is made is anybody's again.
  queue.nextOf(1);
  queue.nextOf(1);
  expect(queue.offer(3, { lane: 3, bytes: 10e3, nth: 1 })).toBe(true);
});

test('one message larger than a lane’s part is taken when the lane is empty', () => {
  const queue = queueOf({ ...BOUNDS, laneBytes: 5e3 });
  expect(queue.offer(1, { lane: 1, bytes: 1e5, nth: 0 })).toBe(true);
  expect(queue.offer(1, { lane: 1, bytes: 10, nth: 1 })).toBe(false);
  expect(drain(queue)).toHaveLength(1);
});

test('many small messages are bounded too', () => {
  expect(fill(queueOf(), 1, 0, 1e6)).toBeLessThan(4_000);
});
