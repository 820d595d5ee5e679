/** Uniform numbers in [0, 1) and standard normal numbers from one seed. */
export interface Random {
  uniform(): number;
  /** Mean 0, variance 1. */
  normal(): number;
}

/**
 * Seeded random numbers: the 32-bit xorshift generator (Marsaglia, Xorshift RNGs, Journal of Statistical Software
 * 2003), normal ones by his polar method (Marsaglia & Bray 1964). The same seed gives the same numbers.
 *
 * @param seed any integer
 * @param stream any text; different texts give different sequences of one seed
 */
export function randomFrom(seed: number, stream = ''): Random {
  let x = Math.imul(seed | 0, 0x9e3779b1) ^ 0x6d2b79f5;
  for (let i = 0; i < stream.length; i++) x = Math.imul(x ^ stream.charCodeAt(i), 0x01000193);
  if (x === 0) x = 1;
  const uniform = (): number => {
    x ^= x << 13;
    x ^= x >>> 17;
    x ^= x << 5;
    return (x >>> 0) / 4294967296;
  };
  for (let i = 0; i < 16; i++) uniform();
  let spare: number | null = null;
  const normal = (): number => {
    if (spare !== null) {
      const value = spare;
      spare = null;
      return value;
    }
    for (;;) {
      const a = 2 * uniform() - 1;
      const b = 2 * uniform() - 1;
      const s = a * a + b * b;
      if (s >= 1 || s === 0) continue;
      const scale = Math.sqrt((-2 * Math.log(s)) / s);
      spare = b * scale;
      return a * scale;
    }
  };
  return { uniform, normal };
}
