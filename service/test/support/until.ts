/** Looks again and again until the answer is neither null, undefined nor false. */
export async function until<T>(
  what: string,
  look: () => Promise<T | null | undefined | false> | T | null | undefined | false,
  withinMs = 15_000,
): Promise<T> {
  const end = Date.now() + withinMs;
  for (;;) {
    const found = await look();
    if (found !== null && found !== undefined && found !== false) return found;
    if (Date.now() > end) throw new Error(`waited ${withinMs} ms in vain: ${what}`);
    await new Promise((resolve) => setTimeout(resolve, 50));
  }
}
