import { readFile } from 'node:fs/promises';
import { identifyRecord } from '../identification/identify-record.js';
import type { CaptureMapping, CaptureResult } from './capture.entity.js';
import { readCsvRecord } from './csv-record.js';
import { recordOf } from './recorded-samples.js';
import { CaptureProblem, type GriddedRecord } from './sample-grid.js';
import { writeTrace } from './trace-file.js';

/** What is to be worked out: an uploaded CSV with its mapping, or samples that were recorded here. */
export interface CaptureJob {
  /** File with the samples. */
  source: string;
  /** Null for recorded samples. */
  mapping: CaptureMapping | null;
  /** Where the trace goes. */
  trace: string;
}

export type CaptureAnswer =
  | { done: { samples: number; sampleTime: number; duration: number; result: CaptureResult } }
  | { problem: string };

/** Reads, identifies and writes the trace; a capture that cannot be used is an answer, not an exception. */
export async function workCapture({ source, mapping, trace }: CaptureJob): Promise<CaptureAnswer> {
  let record: GriddedRecord;
  try {
    record = mapping ? await readCsvRecord(source, mapping) : recordOf(await readFile(source));
  } catch (error) {
    if (error instanceof CaptureProblem) return { problem: error.message };
    throw error;
  }
  const { verdict, remarks, movingSeconds, estimate, traces } = identifyRecord(record);
  const { position, output, target, sampleTime } = record;
  const length = position.length;
  await writeTrace(trace, {
    sampleTime,
    length,
    columns: {
      target: target ? Float32Array.from(target) : new Float32Array(length).fill(NaN),
      position: Float32Array.from(position),
      output: Float32Array.from(output),
      velocity: traces.measuredVelocity,
      simulatedVelocity: traces.simulatedVelocity,
      residual: traces.positionResidual,
    },
  });
  return {
    done: {
      samples: length,
      sampleTime,
      duration: (length - 1) * sampleTime,
      result: { verdict, remarks: [...remarks, ...record.remarks], movingSeconds, estimate },
    },
  };
}
