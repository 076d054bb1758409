/** What feeds each line of the invented Marrow Coast network: short-circuit impedances behind the ends [ohm] and load angles. Invented, of usual size. */
import type { Line } from "../config/index.ts";
import type { Source } from "./line-model.ts";

/** Three-phase short-circuit power behind a station [GVA]: strong in the middle of the grid, weak at its end. */
const SHORT_CIRCUIT_GVA: Readonly<Record<string, number>> = { brack: 4.2, tolva: 3.1, quenby: 5.5, ister: 7.8, nolde: 2.4 };
const OTHERWISE_GVA = 4;
/** Reactance over resistance behind a transmission station, and zero over positive sequence; common practice, no source. */
const X_OVER_R = 14;
const ZERO_OVER_POSITIVE = 1.2;
/** Angle along the lines: power flows from the first terminal. */
const LOAD_ANGLE_DEG = 9;

export function sourcesOf(line: Line): readonly [Source, Source] {
  const [a, b] = [line.terminals[0]!, line.terminals.at(-1)!];
  const source = (stationId: string, angleDeg: number): Source => {
    const x = line.nominalKv ** 2 / ((SHORT_CIRCUIT_GVA[stationId] ?? OTHERWISE_GVA) * 1e3);
    return {
      z1: [x / X_OVER_R, x],
      z0: [(x * ZERO_OVER_POSITIVE) / X_OVER_R, x * ZERO_OVER_POSITIVE],
      angleDeg,
      voltagePerUnit: 1.02,
    };
  };
  return [source(a.stationId, LOAD_ANGLE_DEG), source(b.stationId, 0)];
}
