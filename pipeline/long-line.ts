/**
 * A uniform line seen through one sequence: distributed series impedance and shunt susceptance, whole-line values.
 *   V(x) = V cosh(γx) − Zc I sinh(γx),  I(x) = I cosh(γx) − V/Zc sinh(γx),  γ = √(Z·jB), Zc = √(Z/jB)
 * Source: any power-system text (e.g. Grainger & Stevenson, Power System Analysis, ch. 6), from memory.
 */
import { abs, add, atanh, type Complex, complex, cosh, div, mul, scale, sinh, sqrt, sub } from "./complex.ts";

export interface SequenceLine {
  /** Series impedance of the whole line [ohm]. */
  readonly z: Complex;
  /** γ times the whole length; zero for a line without capacitance. */
  readonly gamma: Complex;
  /** Characteristic impedance [ohm]; unused when gamma is zero. */
  readonly zc: Complex;
}

/** @param susceptance  of the whole line [S]; 0 gives the lumped line */
export function sequenceLine(z: Complex, susceptance: number): SequenceLine {
  const y = complex(0, susceptance);
  return susceptance > 0 ? { z, gamma: sqrt(mul(z, y)), zc: sqrt(div(z, y)) } : { z, gamma: complex(0), zc: complex(0) };
}

export interface VoltageCurrent {
  readonly v: Complex;
  readonly i: Complex;
}

/** What stands at fraction `m` of the line, seen from the end where `v` and `i` (into the line) are measured. */
export function along(line: SequenceLine, { v, i }: VoltageCurrent, m: number): VoltageCurrent {
  if (line.gamma.im === 0) return { v: sub(v, scale(mul(line.z, i), m)), i };
  const g = scale(line.gamma, m);
  const ch = cosh(g);
  const sh = sinh(g);
  return { v: sub(mul(v, ch), mul(mul(line.zc, i), sh)), i: sub(mul(i, ch), mul(div(v, line.zc), sh)) };
}

/**
 * The fraction from end A at which both ends compute the same voltage, complex: its imaginary part is zero for clean data.
 *   lumped       m = ((VA − VB)/Z + IB)/(IA + IB)
 *   distributed  tanh(γx) = (VB cosh γL − Zc IB sinh γL − VA)/(VB sinh γL − Zc IB cosh γL − Zc IA)
 * Source: Johns & Jamali, IEE Proc. C 137 (1990); equation from memory, rederived.
 * NaN when no current meets at the fault.
 */
export function meetingPlace(line: SequenceLine, a: VoltageCurrent, b: VoltageCurrent): Complex {
  if (line.gamma.im === 0) return div(add(div(sub(a.v, b.v), line.z), b.i), add(a.i, b.i));
  const ch = cosh(line.gamma);
  const sh = sinh(line.gamma);
  const zi = mul(line.zc, b.i);
  const top = sub(sub(mul(b.v, ch), mul(zi, sh)), a.v);
  const bottom = sub(sub(mul(b.v, sh), mul(zi, ch)), mul(line.zc, a.i));
  return abs(bottom) === 0 ? complex(Number.NaN, Number.NaN) : div(atanh(div(top, bottom)), line.gamma);
}
