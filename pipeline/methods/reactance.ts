import { type Complex, div } from "../complex.ts";

/**
 * Place of a fault from the reactance of the loop alone: m = Im(V/I)/Im(Z1). Source: common practice, no source.
 * @param v, i  loop voltage [V] and loop current [A], rms phasors of one time tag
 * @param z1    positive-sequence impedance of the whole line [ohm]
 * @returns     fraction of the line from this end; NaN without current
 * Errs with fault resistance as soon as current flows from the far end too.
 */
export function simpleReactance(v: Complex, i: Complex, z1: Complex): number {
  return div(v, i).im / z1.im;
}
