/** Complex arithmetic on small immutable values, for formulas that run a few thousand times an event. Frame loops use typed arrays instead. */
import type { Complex } from "../config/index.ts";

export type { Complex };

export const complex = (re: number, im = 0): Complex => ({ re, im });
export const polar = (magnitude: number, angleRad: number): Complex => ({
  re: magnitude * Math.cos(angleRad),
  im: magnitude * Math.sin(angleRad),
});
export const add = (a: Complex, b: Complex): Complex => ({ re: a.re + b.re, im: a.im + b.im });
export const sub = (a: Complex, b: Complex): Complex => ({ re: a.re - b.re, im: a.im - b.im });
export const mul = (a: Complex, b: Complex): Complex => ({ re: a.re * b.re - a.im * b.im, im: a.re * b.im + a.im * b.re });
export const scale = (a: Complex, k: number): Complex => ({ re: a.re * k, im: a.im * k });
export const conj = (a: Complex): Complex => ({ re: a.re, im: -a.im });
export const abs = (a: Complex): number => Math.hypot(a.re, a.im);
export const arg = (a: Complex): number => Math.atan2(a.im, a.re);
/** NaN in both parts when `b` is zero. */
export function div(a: Complex, b: Complex): Complex {
  const d = b.re * b.re + b.im * b.im;
  return { re: (a.re * b.re + a.im * b.im) / d, im: (a.im * b.re - a.re * b.im) / d };
}
export const sqrt = (a: Complex): Complex => polar(Math.sqrt(abs(a)), arg(a) / 2);
export const cosh = (a: Complex): Complex => ({ re: Math.cosh(a.re) * Math.cos(a.im), im: Math.sinh(a.re) * Math.sin(a.im) });
export const sinh = (a: Complex): Complex => ({ re: Math.sinh(a.re) * Math.cos(a.im), im: Math.cosh(a.re) * Math.sin(a.im) });
/** Principal value of the inverse hyperbolic tangent: ½ ln((1+z)/(1−z)). */
export function atanh(z: Complex): Complex {
  const q = div(add(complex(1), z), sub(complex(1), z));
  return { re: Math.log(abs(q)) / 2, im: arg(q) / 2 };
}
