/**
 * Phasors of a fault on a lumped line between two sources, by the textbook interconnection of sequence networks; written for the tests alone, with no
 * code of the pipeline's. Source: Grainger & Stevenson, Power System Analysis, ch. 12 (unsymmetrical faults), formulas from memory.
 */
export interface C {
  re: number;
  im: number;
}
export const c = (re: number, im = 0): C => ({ re, im });
const plus = (...x: C[]): C => ({ re: x.reduce((s, v) => s + v.re, 0), im: x.reduce((s, v) => s + v.im, 0) });
const times = (x: C, y: C): C => c(x.re * y.re - x.im * y.im, x.re * y.im + x.im * y.re);
const minus = (x: C, y: C): C => c(x.re - y.re, x.im - y.im);
const by = (x: C, k: number): C => c(x.re * k, x.im * k);
const over = (x: C, y: C): C => {
  const d = y.re ** 2 + y.im ** 2;
  return c((x.re * y.re + x.im * y.im) / d, (x.im * y.re - x.re * y.im) / d);
};
const a = c(-0.5, Math.sqrt(3) / 2);
const a2 = c(-0.5, -Math.sqrt(3) / 2);
const besides = (x: C, y: C): C => over(times(x, y), plus(x, y));

export interface TwoSource {
  eA: C;
  eB: C;
  sA1: C;
  sA0: C;
  sB1: C;
  sB0: C;
  z1: C;
  z0: C;
  /** Fraction of the line from A. */
  m: number;
  ohm: number;
  type: string;
}

export interface EndPhasorSet {
  /** VA VB VC IA IB IC before and in the fault. */
  pre: C[];
  fault: C[];
}

export function solve(n: TwoSource): { a: EndPhasorSet; b: EndPhasorSet } {
  const load = over(minus(n.eA, n.eB), plus(n.sA1, n.z1, n.sB1));
  const near1 = plus(n.sA1, by(n.z1, n.m));
  const far1 = plus(n.sB1, by(n.z1, 1 - n.m));
  const near0 = plus(n.sA0, by(n.z0, n.m));
  const far0 = plus(n.sB0, by(n.z0, 1 - n.m));
  const t1 = besides(near1, far1);
  const t0 = besides(near0, far0);
  const open = minus(n.eA, times(near1, load));
  // Sequences for the reference orientation: A to ground, B-C, or B-C-ground.
  let i1: C;
  let i2 = c(0);
  let i0 = c(0);
  const phases = n.type.replace("G", "");
  if (phases === "ABC") i1 = over(open, plus(t1, c(n.ohm)));
  else if (phases.length === 1) i1 = i2 = i0 = over(rotated(open, n.type), plus(t1, t1, t0, c(3 * n.ohm)));
  else if (!n.type.includes("G")) {
    i1 = over(rotated(open, n.type), plus(t1, t1, c(n.ohm)));
    i2 = by(i1, -1);
  } else {
    const ground = plus(t0, c(3 * n.ohm));
    i1 = over(rotated(open, n.type), plus(t1, besides(t1, ground)));
    i2 = by(times(i1, over(ground, plus(t1, ground))), -1);
    i0 = by(times(i1, over(t1, plus(t1, ground))), -1);
  }
  const end = (e: C, s1: C, s0: C, share1: C, share0: C, sign: number): EndPhasorSet => {
    const preI = by(load, sign);
    const preV = minus(e, times(s1, preI));
    const j1 = times(share1, i1);
    const j2 = times(share1, i2);
    const j0 = times(share0, i0);
    // Work in the rotated reference, then rename the phases back.
    const I = toAbc(j0, plus(rotated(preI, n.type), j1), j2);
    const V = toAbc(by(times(s0, j0), -1), minus(rotated(preV, n.type), times(s1, j1)), by(times(s1, j2), -1));
    return {
      pre: [...toAbc(c(0), preV, c(0)), ...toAbc(c(0), preI, c(0))],
      fault: [...renamed(V, n.type), ...renamed(I, n.type)],
    };
  };
  return {
    a: end(n.eA, n.sA1, n.sA0, over(far1, plus(near1, far1)), over(far0, plus(near0, far0)), 1),
    b: end(n.eB, n.sB1, n.sB0, over(near1, plus(near1, far1)), over(near0, plus(near0, far0)), -1),
  };
}

/** 0, 1, 2 when the odd phase (faulted alone, or healthy of a pair) is A, B, C. */
function oddPhase(type: string): number {
  const phases = type.replace("G", "");
  if (phases.length === 3) return 0;
  return phases.length === 1 ? "ABC".indexOf(phases) : ["BC", "CA", "AB"].indexOf(phases);
}
/** Positive-sequence value seen from the odd phase. */
const rotated = (x: C, type: string): C => times(x, [c(1), a2, a][oddPhase(type)]!);
/** [odd, next, next but one] -> [A, B, C] */
function renamed(x: C[], type: string): C[] {
  const odd = oddPhase(type);
  return [0, 1, 2].map((p) => x[(p - odd + 3) % 3]!);
}
function toAbc(z: C, p: C, n: C): C[] {
  return [plus(z, p, n), plus(z, times(a2, p), times(a, n)), plus(z, times(a, p), times(a2, n))];
}

/** A 230 kV line of 150 km between a strong and a weaker source, A leading by 15 degrees. */
export const example = (over_: Partial<TwoSource>): TwoSource => {
  const e = 230e3 / Math.sqrt(3);
  const angle = (15 * Math.PI) / 180;
  return {
    eA: c(e),
    eB: c(e * Math.cos(angle), -e * Math.sin(angle)),
    sA1: c(2, 20),
    sA0: c(3, 25),
    sB1: c(3, 30),
    sB0: c(4, 35),
    z1: c(10.5, 73.5),
    z0: c(52.5, 202.5),
    m: 0.3,
    ohm: 5,
    type: "AG",
    ...over_,
  };
};
