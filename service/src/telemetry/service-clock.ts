const startedAt = performance.timeOrigin;

/**
 * Now by the service, ms since the Unix epoch: the later of the wall clock and of the monotonic clock since the start.
 * A wall clock that somebody sets back while the service runs must not make every gateway's samples come from the
 * future; one that is set forward is followed.
 */
export const serviceNow = (): number => Math.max(Date.now(), startedAt + performance.now());
