import { floorUnderLoad, serviceUnderLoad } from './intake/run-load.js';
import { round, type BenchRecord } from './measure.js';

/** Seconds of the measured load; SCALE_SECONDS of each step of the fleet's size. */
const SECONDS = Number(process.env.BENCH_INTAKE_SECONDS ?? 60);
const SCALE_SECONDS = Number(process.env.BENCH_INTAKE_SCALE_SECONDS ?? Math.min(SECONDS, 15));
const AXES = Number(process.env.BENCH_INTAKE_AXES ?? 1_000);
const SCALE = (process.env.BENCH_INTAKE_SCALE ?? '10,100,3000').split(',').filter(Boolean).map(Number);

/** Intake of a large plant by the built service under load processes of their own. */
export default async function bench(): Promise<BenchRecord[]> {
  const service = await serviceUnderLoad(AXES, SECONDS);
  const floor = await floorUnderLoad(AXES, SECONDS);
  const name = `intake of ${AXES} axes at 1 kHz, ${SECONDS} s`;
  const plain = (what: string, value: number | null, unit: string, note?: string): BenchRecord => ({
    name: `${name}: ${what}`,
    value: value === null ? null : round(value),
    unit,
    floor: null,
    ratio: null,
    ...(note && { note }),
  });
  const records: BenchRecord[] = [
    {
      name: `${name}: share of one core`,
      value: round(service.cores),
      unit: 'cores',
      floor: round(floor),
      ratio: round(service.cores / floor),
      note: 'floor: a bare socket.io server that decodes the same messages and runs the same filters and sums in plain loops, and stores nothing',
    },
    plain(
      'samples not taken',
      service.samplesSent - service.samplesTaken,
      'samples',
      `of ${service.samplesSent}`,
    ),
    plain('messages refused', service.refused, 'messages'),
    plain(
      'resident memory at the end',
      service.residentEndMiB,
      'MiB',
      `at the start ${round(service.residentStartMiB)}`,
    ),
    plain(
      'from the end of a second to its tile value leaving, p95',
      service.tileP95Ms,
      'ms',
      'holds the beats of messages (100 ms), checkpoint (1 s) and page (0.5 s)',
    ),
    plain(
      'longest checkpoint',
      service.longestCheckpointMs,
      'ms',
      'since the start: it holds the first one, which writes every part of every axis',
    ),
    plain('most that the load itself was late', service.lateMs, 'ms'),
  ];
  for (const axes of SCALE) {
    const { cores, samplesSent, samplesTaken, lateMs } = await serviceUnderLoad(axes, SCALE_SECONDS);
    records.push({
      name: `intake per axis, ${axes} axes at 1 kHz`,
      value: round((1e3 * cores) / axes),
      unit: 'ms of CPU per axis and second',
      floor: round((1e3 * service.cores) / AXES),
      ratio: round(cores / axes / (service.cores / AXES)),
      note: `floor: the cost per axis at ${AXES} axes; not taken ${samplesSent - samplesTaken} of ${samplesSent}, load late by ${round(lateMs)} ms`,
    });
  }
  return records;
}
