/** Seeded random numbers of the simulator's own: the same scenario gives the same frames. xorshift32 (Marsaglia 2003); polar method for the bell. */
export interface Random {
  /** 0..1 */
  uniform(): number;
  normal(): number;
}

export function randomFrom(seed: number): Random {
  let x = (seed * 2_654_435_761 + 1) >>> 0 || 1;
  const uniform = () => {
    x ^= x << 13;
    x >>>= 0;
    x ^= x >>> 17;
    x ^= x << 5;
    x >>>= 0;
    return x / 4_294_967_296;
  };
  for (let k = 0; k < 8; k++) uniform();
  return {
    uniform,
    normal() {
      for (;;) {
        const [u, v] = [2 * uniform() - 1, 2 * uniform() - 1];
        const s = u * u + v * v;
        if (s > 0 && s < 1) return u * Math.sqrt((-2 * Math.log(s)) / s);
      }
    },
  };
}
