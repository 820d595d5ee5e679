import { screen, waitFor, within } from '@testing-library/react';
import userEvent from '@testing-library/user-event';
import { afterEach, beforeEach, describe, expect, test, vi } from 'vitest';
import type { Role } from '../src/api/policy';
import { Component as CapturePage } from '../src/features/captures/capture-page';
import type { Capture } from '../src/features/captures/captures-api';
import { Component as CapturesPage } from '../src/features/captures/captures-page';
import { guessMapping, guessUnit, readFileHead } from '../src/features/captures/file-head';
import { axisOf } from './axis-of';
import { refusal, serviceOfTests, showPage } from './show-page';

const interval = (value: number) => ({ value, low: value * 0.99, high: value * 1.01 });
const captureOf = (differs: Partial<Capture>): Capture => ({
  id: 5,
  siteId: 1,
  axisId: 3,
  axisTag: 'GL-02 carriage',
  timeZone: 'Europe/London',
  source: 'upload',
  alertId: null,
  createdAt: '2026-12-01T06:00:00.000Z',
  createdBy: 'Ada Fenn',
  fileName: 'carriage.csv',
  status: 'done',
  recording: false,
  samples: 20_000,
  sampleTime: 0.001,
  duration: 19.999,
  identification: {
    gain: interval(16),
    pole: interval(12.9),
    coulomb: interval(1.5),
    bias: interval(0.2),
    deadTime: 0.003,
    fitPct: 98.7,
    movingSeconds: 14,
    verdict: 'usable',
    remarks: ['3 of 20000 samples are missing'],
  },
  ...differs,
});

const service = serviceOfTests();
beforeEach(() => {
  service.current.list('/api/v1/axes', [axisOf({})]);
  service.current.on('GET /api/v1/captures/5/trace', () => ({
    status: 200,
    body: {
      time: [0, 1, 2],
      target: [null, null, null],
      position: [0, 5, 9],
      output: [0, 40, 2],
      velocity: [null, 9, 4],
      simulatedVelocity: [null, 8.8, null],
      residual: [null, 0.001, null],
    },
  }));
});

/** Stands in for the browser's upload: what was sent, and what the service says to it. */
class Upload {
  static sent: FormData | null = null;
  static answer: { status: number; body: unknown } = { status: 201, body: { id: 5 } };
  status = 0;
  response: unknown = null;
  responseType = '';
  upload: { onprogress?: (event: object) => void } = {};
  onload: () => void = () => undefined;
  open(): void {}
  setRequestHeader(): void {}
  abort(): void {}
  send(form: FormData): void {
    Upload.sent = form;
    this.upload.onprogress?.({ loaded: 50, total: 100 });
    this.status = Upload.answer.status;
    this.response = Upload.answer.body;
    setTimeout(() => this.onload(), 0);
  }
}
afterEach(() => {
  Upload.sent = null;
  Upload.answer = { status: 201, body: { id: 5 } };
});

const CSV = 'Zeit;Soll_mm;Pos_um;u\r\n0,000;1,5;1500,2;3\r\n0,001;1,5;1500,4;3\r\n';
const file = (content: string, name = 'axis.csv'): File => new File([content], name, { type: 'text/csv' });

describe('upload', () => {
  const open = (role: Role = 'technician', at = '/captures'): void => {
    service.current.list('/api/v1/captures', []);
    vi.stubGlobal('XMLHttpRequest', Upload);
    showPage(CapturesPage, at, role, '/captures');
  };

  test('guesses columns and units, shows the first rows, and sends what was chosen', async () => {
    open('technician', '/captures?axis=3');
    await userEvent.upload(await screen.findByLabelText('CSV file'), file(CSV));
    const preview = await screen.findByRole('region', { name: 'First rows of the file' });
    expect(within(preview).getByText('1500,4')).toBeInTheDocument();
    expect(screen.getByRole('combobox', { name: 'time' })).toHaveValue('Zeit');
    expect(screen.getByRole('combobox', { name: 'unit of position' })).toHaveValue('µm');
    await userEvent.click(screen.getByRole('button', { name: 'Upload and identify' }));
    await waitFor(() => expect(Upload.sent).not.toBeNull());
    expect(JSON.parse(Upload.sent!.get('mapping') as string)).toEqual({
      time: 'Zeit',
      target: 'Soll_mm',
      position: 'Pos_um',
      output: 'u',
      units: { time: 's', position: 'um', output: 'percent' },
    });
    expect(Upload.sent!.get('axisId')).toBe('3');
    // On to the result.
    expect(await screen.findByText('elsewhere')).toBeInTheDocument();
  });

  test('a refusal is shown in the service’s words and what was chosen stays', async () => {
    Upload.answer = refusal(400, 'Bad input', [{ path: 'file', message: 'the file is packed' }]) as never;
    open();
    await userEvent.upload(await screen.findByLabelText('CSV file'), file(CSV));
    await userEvent.click(await screen.findByRole('button', { name: 'Upload and identify' }));
    expect(await screen.findByRole('alert')).toHaveTextContent('the file is packed');
    expect(screen.getByRole('combobox', { name: 'output' })).toHaveValue('u');
  });

  test('what is no table is said before anything is sent; a viewer only looks', async () => {
    open();
    await userEvent.upload(await screen.findByLabelText('CSV file'), file('just words\n', 'notes.csv'));
    expect(await screen.findByRole('alert')).toHaveTextContent(
      'notes.csv: This does not look like a CSV file',
    );
    expect(Upload.sent).toBeNull();
  });

  test('a viewer sees the list and no form', async () => {
    open('viewer');
    expect(await screen.findByText('No captures yet')).toBeInTheDocument();
    expect(screen.queryByRole('button', { name: 'Choose a file' })).toBeNull();
  });
});

test('guesses by names and nothing by force', async () => {
  expect(guessMapping(['time_ms', 'target', 'position', 'output'])).toEqual({
    time: 'time_ms',
    target: 'target',
    position: 'position',
    output: 'output',
  });
  expect(guessMapping(['a', 'b'])).toEqual({ time: null, target: null, position: null, output: null });
  expect(guessUnit('time_ms', ['s', 'ms', 'us'], 's')).toBe('ms');
  expect(guessUnit('seconds', ['s', 'ms', 'us'], 's')).toBe('s');
  expect(await readFileHead(file('\uFEFFt\ty\n1\t2\n'))).toEqual({ columns: ['t', 'y'], rows: [['1', '2']] });
});

describe('a capture', () => {
  const open = (capture: Capture, role: Role = 'engineer'): void => {
    service.current.on('GET /api/v1/captures/5', () => ({ status: 200, body: capture }));
    showPage(CapturePage, '/captures/5', role, '/captures/:id');
  };

  test('shows plant, remarks and traces; an engineer makes it the baseline after seeing both', async () => {
    service.current.on('POST /api/v1/captures/5/baseline', () => ({ status: 204 }));
    open(captureOf({}));
    expect(await screen.findByText('Plant, usable')).toBeInTheDocument();
    expect(screen.getByText('3 of 20000 samples are missing')).toBeInTheDocument();
    expect(await screen.findByRole('img', { name: /^velocity over time/ })).toBeInTheDocument();
    await userEvent.click(screen.getByRole('button', { name: 'Make this the baseline …' }));
    const dialog = await screen.findByRole('dialog');
    expect(
      await within(dialog).findByText(/Drift of GL-02 carriage is judged from now on against K = 16\.0/),
    ).toHaveTextContent('instead of 16.0 and 12.9');
    await userEvent.click(
      within(dialog).getByRole('button', { name: 'This is how GL-02 carriage should be' }),
    );
    await waitFor(() =>
      expect(service.current.bodies('POST /api/v1/captures/5/baseline')).toEqual([{ axisId: 3 }]),
    );
  });

  test('a doubtful one and a technician offer no baseline', async () => {
    open(captureOf({ identification: { ...captureOf({}).identification!, verdict: 'doubtful' } }));
    expect(await screen.findByText('Plant, doubtful')).toBeInTheDocument();
    expect(screen.queryByRole('button', { name: 'Make this the baseline …' })).toBeNull();
  });

  test('a waiting one can be cancelled and then says so', async () => {
    const { identification, ...rest } = captureOf({ status: 'queued', samples: null });
    expect(identification).toBeDefined();
    open(rest as Capture, 'technician');
    service.current.on('POST /api/v1/captures/5/cancel', () => ({
      status: 200,
      body: { ...rest, status: 'failed', problem: 'Cancelled by Ada Fenn.' },
    }));
    expect(await screen.findByText('waiting')).toBeInTheDocument();
    await userEvent.click(screen.getByRole('button', { name: 'Cancel' }));
    expect(await screen.findByRole('alert')).toHaveTextContent('Cancelled by Ada Fenn.');
  });
});
