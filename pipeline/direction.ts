/**
 * What a disturbance is to a line: on it, behind one of its ends, or no fault at all. Superimposed and negative-sequence voltage against current
 * at each measured end: for a fault in front, −ΔV/ΔI is the source behind (inductive); for one behind, ΔV/ΔI is the line and what lies beyond.
 * Source: directional elements of distance protection, common practice, no source.
 */
import { abs, type Complex, conj, mul, scale, sub } from "./complex.ts";
import { type EndPhasors, superimposedAmp } from "./evidence.ts";
import { toSequence } from "./sequence.ts";

export type Verdict =
  | { readonly kind: "on the line" }
  | { readonly kind: "behind"; readonly endIndex: number }
  | { readonly kind: "no fault"; readonly reason: string }
  /** What frames that are still moving cannot tell. */
  | { readonly kind: "undecided" };

/** Fall of a phase voltage, and negative sequence over superimposed positive sequence current, under both of which nothing short-circuits. Load and
 * capacitor switching move transmission voltages by up to some 2-3 %: common practice, no source. */
const DIP = 0.04;
const UNBALANCE = 0.1;
/** Current before, over the largest superimposed current of any end, under which an end stood open; and the noise of an open end. */
const OPEN_SHARE = 0.02;
const OPEN_AMP = 5;
/** Share of nominal from which a voltage counts as there. */
const ALIVE_SHARE = 0.7;

/** 1: clearly in front of this end, −1: clearly behind. */
function forwardness(end: EndPhasors): number {
  let power = 0;
  let size = 0;
  const v = toSequence([delta(end, 0), delta(end, 1), delta(end, 2)]);
  const i = toSequence([delta(end, 3), delta(end, 4), delta(end, 5)]);
  for (const [dv, di] of [
    [v.positive, i.positive],
    [v.negative, i.negative],
  ] as const) {
    power += mul(scale(dv, -1), conj(di)).im;
    size += abs(dv) * abs(di);
  }
  return size === 0 ? 0 : power / size;
}

const delta = (end: EndPhasors, c: number): Complex => sub(end.fault[c]!, end.pre[c]!);

/**
 * @param isMoving  the phasors are a mixture of before and now: an end that stood open may then be closing just as well as feeding a fault
 */
export function judge(ends: readonly EndPhasors[], nominalKv: number, isMoving: boolean): Verdict {
  const biggest = (pick: (end: EndPhasors) => number) => Math.max(...ends.map(pick));
  const jump = biggest(superimposedAmp);
  const wasOpen = (end: EndPhasors) => [3, 4, 5].every((c) => abs(end.pre[c]!) < Math.max(OPEN_AMP, OPEN_SHARE * jump));
  if (isMoving && ends.some(wasOpen)) return { kind: "undecided" };
  const nominal = (nominalKv * 1e3) / Math.sqrt(3);
  const dip = biggest((end) => {
    const wasAlive = [0, 1, 2].every((c) => abs(end.pre[c]!) > ALIVE_SHARE * nominal);
    return Math.max(...[0, 1, 2].map((c) => 1 - abs(end.fault[c]!) / (wasAlive ? abs(end.pre[c]!) : nominal)));
  });
  const unbalance = biggest((end) => {
    const i = toSequence([delta(end, 3), delta(end, 4), delta(end, 5)]);
    return abs(i.negative) / Math.max(abs(i.positive), 1e-9);
  });
  if (ends.some(wasOpen) && dip < DIP) return { kind: "no fault", reason: "not a fault: line switched in" };
  if (dip < DIP && unbalance < UNBALANCE)
    return { kind: "no fault", reason: "not a fault: balanced change without a voltage dip" };
  for (const end of ends) if (forwardness(end) < 0) return { kind: "behind", endIndex: end.terminal.index };
  return { kind: "on the line" };
}
