import type { GriddedRecord } from './sample-grid.js';
import type { KeptBlock } from '../telemetry/sample-recorder.js';

/** Blocks of the live stream as one file: a JSON line, then the samples of each block. */
export function recordedFile(resolution: number, blocks: readonly KeptBlock[]): Buffer {
  const head = {
    resolution,
    sampleTimeUs: blocks[0]?.sampleTimeUs ?? 0,
    blocks: blocks.map(({ startUs, target }) => ({ startUs, samples: target.length })),
  };
  const bytes = ({ buffer, byteOffset, byteLength }: Int32Array | Int16Array): Buffer =>
    Buffer.from(buffer, byteOffset, byteLength);
  return Buffer.concat([
    Buffer.from(`${JSON.stringify(head)}\n`),
    ...blocks.flatMap(({ target, position, output }) => [bytes(target), bytes(position), bytes(output)]),
  ]);
}

/** The record of such a file, on the axis's own grid; what was not received is NaN. */
export function recordOf(file: Buffer): GriddedRecord {
  const end = file.indexOf(10);
  const { resolution, sampleTimeUs, blocks } = JSON.parse(file.toString('utf8', 0, end)) as {
    resolution: number;
    sampleTimeUs: number;
    blocks: { startUs: number; samples: number }[];
  };
  const first = blocks[0];
  const last = blocks.at(-1);
  const length = first && last ? Math.round((last.startUs - first.startUs) / sampleTimeUs) + last.samples : 0;
  const column = (): Float64Array => new Float64Array(length).fill(NaN);
  const [target, position, output] = [column(), column(), column()];
  let at = end + 1;
  let received = 0;
  for (const { startUs, samples } of blocks) {
    const from = Math.round((startUs - first!.startUs) / sampleTimeUs);
    for (let i = 0; i < samples; i++) {
      target[from + i] = file.readInt32LE(at + 4 * i) * resolution;
      position[from + i] = file.readInt32LE(at + 4 * (samples + i)) * resolution;
      output[from + i] = file.readInt16LE(at + 8 * samples + 2 * i) / 100;
    }
    at += 10 * samples;
    received += samples;
  }
  const remarks = received < length ? [`${length - received} of ${length} samples were not received`] : [];
  return { sampleTime: sampleTimeUs / 1e6, target, position, output, remarks };
}
