import type { Line } from "../config/index.ts";
import type { Piece } from "./course.ts";
import type { Fault } from "./line-model.ts";

/** What was really done to the network: what an estimate is judged by. */
export interface Truth {
  readonly line: string;
  readonly phases: string;
  /** From the line's first terminal. */
  readonly km: number;
  readonly resistanceOhm: number;
  readonly onsetUs: number;
  /** When the last pole of the fault's phases opened, both ends. */
  readonly clearedUs: number;
  /** [end][pole A, B, C] µs since 1970 UTC; null for a pole that did not open. */
  readonly openedUs: readonly (readonly (number | null)[])[];
}

export function truthOf(line: Line, fault: Fault, onsetUs: number, piece: Piece): Truth {
  const openedUs = piece.waves.opened.map((end) =>
    end.map((t) => (Number.isFinite(t) ? Math.round(piece.startUs + t * 1e6) : null)),
  );
  const phases = [..."ABC"].flatMap((p, k) => (fault.type.includes(p) ? [k] : []));
  const clearedUs = Math.max(...openedUs.flatMap((end) => phases.map((k) => end[k] ?? Number.POSITIVE_INFINITY)));
  return {
    line: line.id,
    phases: fault.type,
    km: fault.km,
    resistanceOhm: fault.ohm,
    onsetUs: Math.round(onsetUs),
    clearedUs,
    openedUs,
  };
}
