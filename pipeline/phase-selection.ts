/**
 * Which phases a fault joins, from the superimposed sequence currents it draws. At the fault, single phase to ground has the three sequences
 * equal (referred to that phase) and phase to phase has positive and negative opposite; so the angle of negative against superimposed positive
 * lies at 0, ±120 degrees for A, B, C to ground and at 180, ±60 for BC, CA, AB, with or without ground. Zero sequence says whether ground is in it.
 * Source: sequence networks of shunt faults, e.g. Grainger & Stevenson, Power System Analysis, ch. 12 (from memory).
 */
import { abs, arg, div } from "./complex.ts";
import type { Sequence } from "./sequence.ts";
import type { FaultType } from "./types.ts";

/** Below this share of the superimposed positive sequence there is no negative sequence to speak of: all three phases. Two phases to ground through
 * resistance keep it above 0.4 in theory, class errors of 0.5 % make some 0.005. */
const NEGATIVE_SHARE_OF_UNBALANCE = 0.15;
/** Class errors of 0.5 % make some 0.005 of zero sequence where there is none. */
const ZERO_SHARE_OF_GROUND = 0.04;

/** Sixths of a turn: single phase or pair whose ideal angle lies there. */
const BY_SIXTH: readonly { readonly phases: string; readonly isSingle: boolean }[] = [
  { phases: "A", isSingle: true },
  { phases: "AB", isSingle: false },
  { phases: "B", isSingle: true },
  { phases: "BC", isSingle: false },
  { phases: "C", isSingle: true },
  { phases: "CA", isSingle: false },
];

export interface PhaseSelection {
  readonly type: FaultType;
  /** Distance of the sequence angle from the nearest other answer [degrees]; 30 is as clear as can be. */
  readonly marginDegrees: number;
}

/**
 * @param current  superimposed sequence currents of the fault (sum of both ends), or of one end when only one is measured
 */
export function selectPhases(current: Sequence): PhaseSelection {
  const positive = abs(current.positive);
  if (abs(current.negative) < NEGATIVE_SHARE_OF_UNBALANCE * positive) return { type: "ABC", marginDegrees: 30 };
  const sixths = arg(div(current.negative, current.positive)) / (Math.PI / 3);
  const nearest = Math.round(sixths);
  const { phases, isSingle } = BY_SIXTH[(nearest + 6) % 6]!;
  const hasGround = isSingle || abs(current.zero) > ZERO_SHARE_OF_GROUND * positive;
  return { type: `${phases}${hasGround ? "G" : ""}` as FaultType, marginDegrees: 30 - 60 * Math.abs(sixths - nearest) };
}
