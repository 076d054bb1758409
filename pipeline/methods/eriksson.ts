import { add, type Complex, complex, div, mul } from "../complex.ts";

/**
 * Place of a fault from one end with both source impedances known: the current distribution is part of the equation, so that load and fault
 * resistance cost nothing. With K = V/(I·Z1):
 *   m² − K1·m + K2 − K3·R = 0,  K1 = K + 1 + ZsFar/Z1,  K2 = K·(1 + ZsFar/Z1),  K3 = ΔI/(I·Z1)·(1 + (ZsNear + ZsFar)/Z1)
 * The imaginary part gives R in terms of m, the real part a quadratic in m; the root with m in 0..1 and R ≥ 0 is the answer.
 * Source: Eriksson, Saha & Rockefeller, IEEE Trans. PAS-104 (1985); equations from memory.
 * @returns fraction of the line from this end and fault resistance [ohm, of the loop]; undefined when no root is on the line
 * Not where a source is a converter: its impedance is not a constant.
 */
export function eriksson(
  v: Complex,
  i: Complex,
  deltaI: Complex,
  z1: Complex,
  sourceNear: Complex,
  sourceFar: Complex,
): { readonly m: number; readonly resistanceOhm: number } | undefined {
  const far = div(sourceFar, z1);
  const k = div(v, mul(i, z1));
  const k1 = add(add(k, complex(1)), far);
  const k2 = mul(k, add(complex(1), far));
  const k3 = mul(div(deltaI, mul(i, z1)), add(complex(1), div(add(sourceNear, sourceFar), z1)));
  // Imaginary part: R = (K2i − K1i·m)/K3i; put into the real part.
  const ratio = k3.re / k3.im;
  const b = -k1.re + ratio * k1.im;
  const c = k2.re - ratio * k2.im;
  const root = b * b - 4 * c;
  if (!(root >= 0)) return undefined;
  const roots = [(-b - Math.sqrt(root)) / 2, (-b + Math.sqrt(root)) / 2].map((m) => ({
    m,
    resistanceOhm: (k2.im - k1.im * m) / k3.im,
  }));
  return roots.find((x) => x.m >= -0.02 && x.m <= 1.02 && x.resistanceOhm >= -0.5);
}
