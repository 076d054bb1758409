/**
 * Symmetrical components (Fortescue 1918): zero, positive and negative sequence of three phase phasors, referred to phase A.
 *   X0 = (Xa + Xb + Xc)/3,  X1 = (Xa + a·Xb + a²·Xc)/3,  X2 = (Xa + a²·Xb + a·Xc)/3,  a = exp(j2π/3)
 */
import { add, type Complex, complex, mul, scale } from "./complex.ts";

export type Abc = readonly [Complex, Complex, Complex];

export interface Sequence {
  readonly zero: Complex;
  readonly positive: Complex;
  readonly negative: Complex;
}

const SIN_120 = Math.sqrt(3) / 2;
/** a = 1∠120° */
const A = complex(-0.5, SIN_120);
const A2 = complex(-0.5, -SIN_120);

export function toSequence([a, b, c]: Abc): Sequence {
  return {
    zero: scale(add(add(a, b), c), 1 / 3),
    positive: scale(add(add(a, mul(A, b)), mul(A2, c)), 1 / 3),
    negative: scale(add(add(a, mul(A2, b)), mul(A, c)), 1 / 3),
  };
}

export function toPhases({ zero, positive, negative }: Sequence): Abc {
  return [
    add(zero, add(positive, negative)),
    add(zero, add(mul(A2, positive), mul(A, negative))),
    add(zero, add(mul(A, positive), mul(A2, negative))),
  ];
}

/** The same on typed arrays: `abc` holds re, im of A, B, C from `at`; `out` gets re, im of zero, positive, negative from `outAt`. */
export function sequenceInto(abc: Float64Array, at: number, out: Float64Array, outAt: number): void {
  const aRe = abc[at]!;
  const aIm = abc[at + 1]!;
  const bRe = abc[at + 2]!;
  const bIm = abc[at + 3]!;
  const cRe = abc[at + 4]!;
  const cIm = abc[at + 5]!;
  const halfRe = aRe - 0.5 * (bRe + cRe);
  const halfIm = aIm - 0.5 * (bIm + cIm);
  const crossRe = SIN_120 * (bIm - cIm);
  const crossIm = SIN_120 * (bRe - cRe);
  out[outAt] = (aRe + bRe + cRe) / 3;
  out[outAt + 1] = (aIm + bIm + cIm) / 3;
  out[outAt + 2] = (halfRe - crossRe) / 3;
  out[outAt + 3] = (halfIm + crossIm) / 3;
  out[outAt + 4] = (halfRe + crossRe) / 3;
  out[outAt + 5] = (halfIm - crossIm) / 3;
}
