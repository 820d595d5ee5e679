/**
 * A whole number from the environment.
 *
 * Ends the process with a sentence where the variable is set and is not one between the bounds.
 */
export function numberSetting(
  env: NodeJS.ProcessEnv,
  name: string,
  usual: number,
  min: number,
  max: number,
): number {
  const text = env[name];
  if (text === undefined || text === '') return usual;
  const value = Number(text);
  if (Number.isInteger(value) && value >= min && value <= max) return value;
  console.error(`${name} is "${text}"; it must be a whole number from ${min} to ${max}`);
  process.exit(1);
}

/** Runs `stop` once at SIGTERM or SIGINT, then ends the process with 0. */
export function stopOnSignals(stop: () => Promise<void>): void {
  let stopping = false;
  const end = (): void => {
    if (stopping) return;
    stopping = true;
    void stop().finally(() => process.exit(0));
  };
  process.on('SIGTERM', end);
  process.on('SIGINT', end);
}
