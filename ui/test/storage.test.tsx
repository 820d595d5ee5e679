import { screen, waitFor, within } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { expect, test } from 'vitest';
import type { Schemas } from '../src/api/client';
import { bytes, count, stretch } from '../src/features/storage/storage-api';
import { Component as StoragePage } from '../src/features/storage/storage-page';
import { refusal, serviceOfTests, showPage } from './show-page';

const service = serviceOfTests();
const DAY = 86_400;
const NAME = 'polewright-2026-11-30T06-00-00.sqlite';

const storageOf = (differs: Partial<Schemas['StorageDto']> = {}): Schemas['StorageDto'] => ({
  freeBytes: 40 * 2 ** 30,
  totalBytes: 100 * 2 ** 30,
  databaseBytes: 3 * 2 ** 30,
  reusableBytes: 0,
  measuredAt: '2026-11-30T12:00:00Z',
  measuring: false,
  tables: [
    {
      name: 'indicator_minute',
      rows: 25_920_000,
      bytes: 2.5 * 2 ** 30,
      rowsPerDay: 288_000,
      keptSeconds: 60 * DAY,
      oldest: '2026-10-01T00:00:00Z',
    },
  ],
  forecast: { outcome: 'not-enough-history', since: null, bytesPerDay: null, fullAt: null, fullInDays: null },
  retention: [
    {
      kind: 'seconds',
      title: 'Seconds',
      keptSeconds: 7_200,
      defaultSeconds: 7_200,
      leastSeconds: 3_600,
      mostSeconds: 7 * DAY,
    },
    {
      kind: 'minutes',
      title: 'Minutes and moves',
      keptSeconds: 60 * DAY,
      defaultSeconds: 60 * DAY,
      leastSeconds: 7 * DAY,
      mostSeconds: 730 * DAY,
    },
  ],
  mayChangeRetention: true,
  backups: {
    items: [
      {
        name: NAME,
        at: '2026-11-30T06:00:00Z',
        bytes: 2.9 * 2 ** 30,
        integrity: { at: '2026-11-30T06:02:00Z', fault: null },
      },
    ],
    kept: 7,
    neededBytes: 3.1 * 2 ** 30,
    progress: null,
    failure: null,
  },
  integrity: null,
  checking: [],
  ...differs,
});

const show = (storage = storageOf(), role: 'administrator' | 'engineer' = 'administrator'): void => {
  service.current.on('GET /api/v1/storage', () => ({ status: 200, body: storage }));
  showPage(StoragePage, '/admin/storage', role);
};

test('only administrators ask for it', async () => {
  show(storageOf(), 'engineer');
  expect(await screen.findByText('Storage is for administrators')).toBeInTheDocument();
  expect(service.current.bodies('GET /api/v1/storage')).toEqual([]);
});

test('it says that there is not enough history, and later when the disk is full', async () => {
  show();
  expect(await screen.findByText(/Not enough history yet/)).toBeInTheDocument();
  const row = screen.getByRole('row', { name: /Indicators by the minute/ });
  expect(row).toHaveTextContent('25 920 000');
  expect(row).toHaveTextContent('2.5 GiB');
  expect(row).toHaveTextContent('60 days');
});

test('the forecast is said with its date and the growth it rests on', async () => {
  show(
    storageOf({
      forecast: {
        outcome: 'full-at',
        since: '2026-11-01T00:00:00Z',
        bytesPerDay: 50 * 2 ** 20,
        fullAt: new Date(Date.now() + 80 * DAY * 1000).toISOString(),
        fullInDays: 80,
      },
    }),
  );
  expect(await screen.findByText(/full in about 80 days/)).toBeInTheDocument();
  expect(screen.getByText('50.0 MiB')).toBeInTheDocument();
});

test('a backup is asked for once, and its progress shown', async () => {
  show();
  service.current.on('POST /api/v1/storage/backups', () => ({
    status: 202,
    body: storageOf({ backups: { ...storageOf().backups, progress: 0.42 } }),
  }));
  await userEvent.click(await screen.findByRole('button', { name: 'Back up now' }));
  await userEvent.click(await screen.findByRole('button', { name: 'Back up' }));
  expect(await screen.findByText(/being made: 42 %/)).toBeInTheDocument();
  expect(service.current.bodies('POST /api/v1/storage/backups')).toHaveLength(1);
  expect(screen.getByRole('button', { name: 'Back up now' })).toBeDisabled();
});

test('without room no backup is offered, and it says why', async () => {
  show(storageOf({ freeBytes: 2 ** 30 }));
  expect(await screen.findByText(/only 1.0 GiB are free: make room first/)).toBeInTheDocument();
  expect(screen.getByRole('button', { name: 'Back up now' })).toBeDisabled();
});

test('a damaged backup says so, and each can be checked', async () => {
  const damaged = storageOf();
  damaged.backups.items[0]!.integrity = {
    at: '2026-11-30T06:02:00Z',
    fault: 'its integrity check says: page 4',
  };
  show(damaged);
  service.current.on('POST /api/v1/storage/checks', () => ({
    status: 202,
    body: storageOf({ checking: [NAME] }),
  }));
  const table = await screen.findByRole('region', { name: 'Backups' });
  expect(within(table).getByText(/its integrity check says: page 4/)).toBeInTheDocument();
  await userEvent.click(within(table).getByRole('button', { name: `Check ${NAME}` }));
  await waitFor(() =>
    expect(service.current.bodies('POST /api/v1/storage/checks')).toEqual([{ subject: NAME }]),
  );
});

test('keeping less asks first and names what goes; keeping more does not', async () => {
  show();
  service.current.on('PATCH /api/v1/storage/retention', () => ({ status: 200, body: storageOf() }));
  const minutes = await screen.findByLabelText('Minutes and moves');
  await userEvent.clear(minutes);
  await userEvent.type(minutes, '30');
  await userEvent.click(screen.getByRole('button', { name: 'Save' }));
  expect(await screen.findByText('Minutes and moves: 30 days instead of 60 days')).toBeInTheDocument();
  expect(service.current.bodies('PATCH /api/v1/storage/retention')).toEqual([]);
  await userEvent.click(screen.getByRole('button', { name: 'Keep less' }));
  await waitFor(() =>
    expect(service.current.bodies('PATCH /api/v1/storage/retention')).toEqual([{ minutes: 30 * DAY }]),
  );
});

test('what the service refuses stands at its field', async () => {
  show();
  service.current.on('PATCH /api/v1/storage/retention', () =>
    refusal(400, 'Bad Request', [{ path: 'seconds', message: 'must be from 1 h to 7 days' }]),
  );
  const seconds = await screen.findByLabelText('Seconds');
  await userEvent.clear(seconds);
  await userEvent.type(seconds, '900');
  await userEvent.click(screen.getByRole('button', { name: 'Save' }));
  expect(await screen.findByText('must be from 1 h to 7 days')).toBeInTheDocument();
  expect(seconds).toHaveValue('900 h');
});

test('sizes, counts and stretches in the units that people use', () => {
  expect([0, 1_023, 1_536, 150 * 2 ** 20, 3.4 * 2 ** 30].map(bytes)).toEqual([
    '0 B',
    '1023 B',
    '1.5 KiB',
    '150 MiB',
    '3.4 GiB',
  ]);
  expect(count(25_920_000)).toBe('25 920 000');
  expect([3_600, 7_200, DAY, 60 * DAY, 365 * DAY, 1_095 * DAY].map(stretch)).toEqual([
    '1 h',
    '2 h',
    '1 day',
    '60 days',
    '1 year',
    '3 years',
  ]);
});
