/**
 * Seeded random numbers. Source: xoroshiro128+ (Blackman and Vigna, "Scrambled linear pseudorandom number
 * generators", ACM TOMS 47(4), 2021) as implemented by the pure-rand package; 53-bit uniforms in [0, 1);
 * normals by the polar method (Marsaglia and Bray, SIAM Review 6(3), 1964).
 */
import { uniformFloat64 } from "pure-rand/distribution/uniformFloat64";
import { xoroshiro128plus } from "pure-rand/generator/xoroshiro128plus";

export interface Random {
  /** Uniform in [0, 1). */
  uniform(): number;
  /** Standard normal. */
  normal(): number;
  /** Uniform integer in [0, n). */
  integer(n: number): number;
  /** Fisher-Yates permutation of 0..n-1. */
  permutation(n: number): number[];
  /** An independent stream named by a label: adding a consumer elsewhere does not change this one. */
  stream(label: string): Random;
}

export function seededRandom(seed: number): Random {
  const generator = xoroshiro128plus(seed | 0);
  const uniform = (): number => uniformFloat64(generator);
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
      if (s > 0 && s < 1) {
        const scale = Math.sqrt((-2 * Math.log(s)) / s);
        spare = b * scale;
        return a * scale;
      }
    }
  };
  const integer = (n: number): number => Math.floor(uniform() * n);
  const permutation = (n: number): number[] => {
    const order = Array.from({ length: n }, (_, i) => i);
    for (let i = n - 1; i > 0; i--) {
      const j = integer(i + 1);
      const held = order[i]!;
      order[i] = order[j]!;
      order[j] = held;
    }
    return order;
  };
  return { uniform, normal, integer, permutation, stream: (label) => seededRandom(hashLabel(seed, label)) };
}

/** FNV-1a (Fowler, Noll and Vo, IETF draft-eastlake-fnv) over the seed and the label, 32 bits. */
function hashLabel(seed: number, label: string): number {
  let hash = 0x811c9dc5;
  for (const char of `${seed}:${label}`) hash = Math.imul(hash ^ char.codePointAt(0)!, 0x01000193);
  return hash | 0;
}
