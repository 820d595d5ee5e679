import { useCallback, useSyncExternalStore } from 'react';
import type { LiveTile, StripPoint } from '../../api/live';

/** Seconds kept per axis: what a strip shows. */
const KEEP = 120;

export interface TileValues {
  tile: LiveTile | null;
  strip: readonly StripPoint[];
}

const NOTHING: TileValues = { tile: null, strip: [] };

/** The newest live values by axis. A tile listens to its own axis only, so one value moves one tile. */
export class LiveTiles {
  private readonly values = new Map<number, TileValues>();
  private readonly listeners = new Map<number, Set<() => void>>();

  get(id: number): TileValues {
    return this.values.get(id) ?? NOTHING;
  }

  /** History for the strips; live seconds that came first stay. */
  fill(id: number, seconds: readonly StripPoint[]): void {
    const { tile, strip } = this.get(id);
    this.put(id, { tile, strip: joined(seconds, strip) });
  }

  take(tiles: readonly LiveTile[]): void {
    for (const tile of tiles)
      this.put(tile.id, { tile, strip: joined(this.get(tile.id).strip, tile.seconds) });
  }

  private put(id: number, values: TileValues): void {
    this.values.set(id, values);
    for (const listener of this.listeners.get(id) ?? []) listener();
  }

  listen(id: number, listener: () => void): () => void {
    const set = this.listeners.get(id) ?? new Set();
    this.listeners.set(id, set.add(listener));
    return () => void set.delete(listener);
  }
}

function joined(older: readonly StripPoint[], newer: readonly StripPoint[]): readonly StripPoint[] {
  if (newer.length === 0) return older;
  const first = newer[0]![0];
  return [...older.filter(([t]) => t < first), ...newer].slice(-KEEP);
}

const NEVER = (): void => {};

/** The newest values of an axis; they move what is drawn only while `follow` holds. */
export function useTile(tiles: LiveTiles, id: number, follow: boolean): TileValues {
  const listen = useCallback(
    (listener: () => void) => (follow ? tiles.listen(id, listener) : NEVER),
    [tiles, id, follow],
  );
  return useSyncExternalStore(listen, () => tiles.get(id));
}
