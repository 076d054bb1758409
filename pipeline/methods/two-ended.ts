import type { Complex } from "../complex.ts";
import { meetingPlace, type SequenceLine, type VoltageCurrent } from "../long-line.ts";

/**
 * Place of a fault from both ends with a common clock, in a sequence in which nothing drives but the fault (negative, zero, or superimposed
 * positive): the place at which both ends compute the same voltage. Needs no source impedance and no fault resistance.
 * Both ends may be scaled by one common factor: the answer is right on any frame with enough fault in it when both units have the same window.
 * @returns  fraction from end A; its imaginary part says how badly the two ends fit (0 for clean data)
 * Source: common practice; distributed form as in `meetingPlace`.
 */
export function twoEndedSynchronised(line: SequenceLine, a: VoltageCurrent, b: VoltageCurrent): Complex {
  return meetingPlace(line, a, b);
}
