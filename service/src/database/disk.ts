import { statfs } from 'node:fs/promises';

export interface DiskSpace {
  /** bytes that this process may still write */
  free: number;
  /** bytes */
  total: number;
}

/** Space of the file system that holds a path. */
export async function diskSpace(path: string): Promise<DiskSpace> {
  const { bavail, blocks, bsize } = await statfs(path);
  return { free: bavail * bsize, total: blocks * bsize };
}
