import { screen, within } from '@testing-library/react';
import { expect, test } from 'vitest';
import { Component as IntakePage } from '../src/features/intake/intake-page';
import type { GatewayIntake, Intake } from '../src/features/intake/intake-api';
import { clockWords, concerns } from '../src/features/intake/intake-words';
import { serviceOfTests, showPage } from './show-page';

const service = serviceOfTests();

const gatewayOf = (differs: Partial<GatewayIntake> = {}): GatewayIntake => ({
  id: 1,
  siteId: 1,
  name: 'Hall gateway',
  via: 'socket',
  lastSeenAt: new Date().toISOString(),
  axes: 12,
  messagesPerSecond: 6.7,
  samplesPerSecond: 12_000,
  lag: 0.2,
  clockOffset: -0.05,
  gaps: 0,
  duplicates: 0,
  droppedSamples: 0,
  refusals: [],
  queueBytes: 0,
  keepEveryMs: 0,
  ...differs,
});
const intakeOf = (gateways: GatewayIntake[], differs: Partial<Intake> = {}): Intake => ({
  at: new Date().toISOString(),
  since: new Date().toISOString(),
  queueBytes: 0,
  queueMessages: 0,
  lag: 0.004,
  lastCheckpoint: 0.031,
  longestCheckpoint: 0.12,
  failedCheckpoints: 0,
  gateways,
  ...differs,
});

test('each gateway with its rate, clock and what was not taken, by reason', async () => {
  service.current.on('GET /api/v1/intake', () => ({
    status: 200,
    body: intakeOf([
      gatewayOf(),
      gatewayOf({
        id: 2,
        name: 'Yard gateway',
        via: null,
        clockOffset: null,
        lag: null,
        gaps: 3,
        droppedSamples: 500,
        refusals: [{ reason: 'time-ahead', count: 4 }],
      }),
    ]),
  }));
  showPage(IntakePage, '/admin/intake', 'administrator');
  const table = within(await screen.findByRole('region', { name: 'Gateways' }));
  const hall = within(table.getByRole('row', { name: /Hall gateway/ }));
  expect(hall.getByText('12.0 k')).toBeInTheDocument();
  expect(hall.getByText('agrees')).toBeInTheDocument();
  expect(hall.getByText('none')).toBeInTheDocument();
  const yard = within(table.getByRole('row', { name: /Yard gateway/ }));
  expect(yard.getByText('not connected')).toBeInTheDocument();
  expect(yard.getByText('4 × time-ahead')).toBeInTheDocument();
  expect(yard.getByText('500 samples out of time')).toBeInTheDocument();
  expect(screen.getByText('31 ms')).toBeInTheDocument();
  expect(screen.getByText(/taken in time/)).toBeInTheDocument();
});

test('a viewer is told whom to ask, and nothing is asked of the service', async () => {
  showPage(IntakePage, '/admin/intake', 'viewer');
  expect(await screen.findByText(/for engineers and administrators/)).toBeInTheDocument();
  expect(service.current.bodies('GET /api/v1/intake')).toEqual([]);
});

test('concerns: a clock, all clocks, a failed checkpoint, lateness, a gateway slowed down', () => {
  const ahead = gatewayOf({ clockOffset: 42.4 });
  expect(clockWords(ahead)).toBe('ahead by 42.4 s');
  expect(clockWords(gatewayOf({ clockOffset: -30 }))).toBe('behind, or late, by 30.0 s');
  expect(concerns(intakeOf([ahead, gatewayOf()]))).toEqual([
    expect.stringMatching(/^The clock of Hall gateway is ahead by 42 s/),
  ]);
  expect(concerns(intakeOf([ahead, ahead]))).toEqual([expect.stringMatching(/this computer's clock first/)]);
  expect(concerns(intakeOf([], { failedCheckpoints: 1 }))).toEqual([
    expect.stringMatching(/^The last checkpoint could not be written/),
  ]);
  expect(concerns(intakeOf([gatewayOf({ lag: 9, keepEveryMs: 2_000 })], { lag: 0.8 }))).toHaveLength(3);
  expect(concerns(intakeOf([gatewayOf({ via: null, lag: 900 })]))).toEqual([]);
});
