/** Which phases a fault type joins, and the loop voltage and current that see it. */
import { add, type Complex, complex, scale, sub } from "./complex.ts";
import { type Abc, type Sequence, toPhases } from "./sequence.ts";
import type { FaultType } from "./types.ts";

/** Faulted phases, 0..2 for A B C. */
export const phasesOf = (type: FaultType): readonly number[] => [...type.replace("G", "")].map((p) => "ABC".indexOf(p));
export const isGrounded = (type: FaultType): boolean => type.includes("G");

/** [p, q] of the loop: to ground p alone; between phases p minus q. A three-phase fault is seen by any pair: A and B. */
function loopOf(type: FaultType): readonly [number, number | undefined] {
  const [p, q] = phasesOf(type) as [number, number | undefined];
  return [p, q];
}

/** Loop voltage from phase voltages. */
export function loopVoltage(type: FaultType, v: Abc): Complex {
  const [p, q] = loopOf(type);
  return q === undefined ? v[p]! : sub(v[p]!, v[q]!);
}

/**
 * Loop current from phase currents: to ground `Ip + k0·3I0` with `k0 = (Z0 − Z1)/(3 Z1)`, between phases the difference. Then `V = m·Z1·I`
 * plus what the fault's own resistance adds.
 */
export function loopCurrent(type: FaultType, i: Abc, k0: Complex): Complex {
  const [p, q] = loopOf(type);
  if (q !== undefined) return sub(i[p]!, i[q]!);
  const residual = add(add(i[0], i[1]), i[2]);
  return add(i[p]!, { re: k0.re * residual.re - k0.im * residual.im, im: k0.re * residual.im + k0.im * residual.re });
}

/** Superimposed loop current, in phase with the fault's own as far as the network is homogeneous: to ground 1.5·(ΔIp − ΔI0), else the difference. */
export function superimposedLoopCurrent(type: FaultType, delta: Sequence): Complex {
  const withoutZero = toPhases({ ...delta, zero: complex(0) });
  const [p, q] = loopOf(type);
  return q === undefined ? scale(withoutZero[p]!, 1.5) : sub(withoutZero[p]!, withoutZero[q]!);
}
