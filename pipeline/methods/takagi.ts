import { type Complex, conj, mul, sub } from "../complex.ts";
import { loopVoltage, superimposedLoopCurrent } from "../fault-loop.ts";
import { along, type SequenceLine } from "../long-line.ts";
import { type Sequence, toPhases } from "../sequence.ts";
import type { FaultType } from "../types.ts";

/**
 * Place of a shunt fault from one end, blind to its resistance while the fault's current is in phase with the superimposed
 * current here:  m = Im(V ΔI*) / Im(Z1 I ΔI*)
 *
 * Source: Takagi et al., IEEE Trans. PAS-101 (1982); equation from memory.
 * @param v, i, deltaI  loop voltage [V], loop current [A], superimposed loop current [A]; rms phasors of one time tag
 * @param z1            positive-sequence impedance of the whole line [ohm]
 * @returns             fraction of the line from this end; may lie outside 0..1; NaN when ΔI is zero
 * Errs with the angle between ΔI and the fault's current: load, weak far end.
 */
export function takagi(v: Complex, i: Complex, deltaI: Complex, z1: Complex): number {
  const dropRe = z1.re * i.re - z1.im * i.im;
  const dropIm = z1.re * i.im + z1.im * i.re;
  return (v.im * deltaI.re - v.re * deltaI.im) / (dropIm * deltaI.re - dropRe * deltaI.im);
}

/** One end's measurements as sequences: in the fault, and less what was before it. */
export interface EndSequences {
  readonly v: Sequence;
  readonly i: Sequence;
  readonly deltaV: Sequence;
  readonly deltaI: Sequence;
}

/** Voltage at fraction m of the line as seen from this end, each sequence along its own line. */
export function sequencesAlong(
  lines: { readonly line1: SequenceLine; readonly line0: SequenceLine },
  v: Sequence,
  i: Sequence,
  m: number,
) {
  const zero = along(lines.line0, { v: v.zero, i: i.zero }, m);
  const positive = along(lines.line1, { v: v.positive, i: i.positive }, m);
  const negative = along(lines.line1, { v: v.negative, i: i.negative }, m);
  return {
    v: { zero: zero.v, positive: positive.v, negative: negative.v },
    i: { zero: zero.i, positive: positive.i, negative: negative.i },
  };
}

/**
 * The same condition on a line with distributed capacitance: the m at which the loop voltage there is in phase with the superimposed current
 * there, Im(V(m)·ΔI(m)*) = 0.
 * @param turnRad  angle by which the fault's current is taken to lead the superimposed current at m; 0 for Takagi's assumption
 * @returns        fraction from this end, sought from −0.5 to 1.5; NaN when there is none
 */
export function takagiLongLine(
  type: FaultType,
  end: EndSequences,
  lines: { readonly line1: SequenceLine; readonly line0: SequenceLine },
  turnRad = 0,
): number {
  const turn = { re: Math.cos(turnRad), im: Math.sin(turnRad) };
  const imbalance = (m: number): number => {
    const at = sequencesAlong(lines, end.v, end.i, m);
    const superimposed = sequencesAlong(lines, end.deltaV, end.deltaI, m);
    return mul(loopVoltage(type, toPhases(at.v)), conj(mul(superimposedLoopCurrent(type, superimposed.i), turn))).im;
  };
  // Nearly a straight line in m: secant steps.
  let [m0, m1] = [0, 1];
  let [f0, f1] = [imbalance(m0), imbalance(m1)];
  for (let step = 0; step < 12; step++) {
    const m2 = m1 - (f1 * (m1 - m0)) / (f1 - f0);
    if (!Number.isFinite(m2) || m2 < -0.5 || m2 > 1.5) return Number.NaN;
    if (Math.abs(m2 - m1) < 1e-7) return m2;
    [m0, f0, m1] = [m1, f1, m2];
    f1 = imbalance(m1);
  }
  return m1;
}

/** x − y for all three sequences. */
export const difference = (x: Sequence, y: Sequence): Sequence => ({
  zero: sub(x.zero, y.zero),
  positive: sub(x.positive, y.positive),
  negative: sub(x.negative, y.negative),
});
