import { parentPort, workerData } from 'node:worker_threads';
import { workCapture, type CaptureJob } from './work-capture.js';

// A thread of its own, so that a long capture delays no sample of the fleet.
parentPort!.postMessage(await workCapture(workerData as CaptureJob));
