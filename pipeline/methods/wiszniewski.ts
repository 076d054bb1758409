import { add, arg, type Complex, div, scale } from "../complex.ts";

/**
 * Place of a fault from one end: the measured loop impedance corrected by the angle γ between the fault's current and the loop current,
 *   m = (Xm − Rm·tan γ)/(X1 − R1·tan γ),  Zm = V/I = Rm + jXm,  Z1 = R1 + jX1
 * γ is the angle of ΔI/I less that of the distribution factor. Source: Wiszniewski, IEE Proc. C 130 (1983); equation from memory.
 * @param v, i, deltaI  loop voltage [V], loop current [A], superimposed loop current [A]
 * @param z1            of the whole line [ohm]
 * @param distributionRad  angle of the current distribution factor (ΔI over the fault's current)
 * @returns fraction of the line from this end
 */
export function wiszniewski(v: Complex, i: Complex, deltaI: Complex, z1: Complex, distributionRad = 0): number {
  const tan = Math.tan(arg(div(deltaI, i)) - distributionRad);
  const z = div(v, i);
  return (z.im - z.re * tan) / (z1.im - z1.re * tan);
}

/**
 * Share of the fault's superimposed current that comes from this end: ((1 − m)·Z1 + ZsFar)/(ZsNear + Z1 + ZsFar).
 * Source: superposition on the lumped line; any text on fault location.
 */
function distributionFactor(m: number, z1: Complex, sourceNear: Complex, sourceFar: Complex): Complex {
  return div(add(scale(z1, 1 - m), sourceFar), add(add(sourceNear, z1), sourceFar));
}

/** Angle [rad] by which the fault's current leads the superimposed current measured here, at place m. */
export const leadOfFaultCurrent = (m: number, z1: Complex, near: Complex, far: Complex): number =>
  -arg(distributionFactor(m, z1, near, far));
