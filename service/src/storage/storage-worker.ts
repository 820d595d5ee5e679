import { parentPort, workerData } from 'node:worker_threads';
import { workStorage, type StorageJob } from './work-storage.js';

// A thread of its own, so that reading a whole file delays no sample of the fleet.
parentPort!.postMessage(workStorage(workerData as StorageJob));
