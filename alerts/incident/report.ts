/**
 * The incident as one JSON object: what `locate` and `watch --json` print, and every machine-readable message holds. Documented in README; fields are only
 * ever added.
 */
import type { Network } from "../../config/index.ts";
import type { Estimate, Flag, Location } from "../../pipeline/types.ts";
import { firstLine } from "../words/first-line.ts";
import { readOut } from "../words/read-out.ts";
import type { IncidentState } from "./fold.ts";

export interface IncidentReport {
  readonly incident: string;
  readonly revision: number;
  readonly stage: "noticed" | "provisional" | "refined" | "settled" | "outside";
  /** Line id; null while unknown and for what lies outside the lines. */
  readonly line: string | null;
  readonly phases: string | null;
  readonly onsetUs: number;
  readonly clearedUs: number | null;
  /** From the line's first terminal. */
  readonly km: number | null;
  readonly kmFromFarEnd: number | null;
  /** [low, high] that holds 90 % of the chance, hull of `pieces`. */
  readonly stretchKm: readonly [number, number] | null;
  readonly pieces: Location["pieces"];
  readonly towers: { readonly from: string; readonly to: string } | null;
  readonly flag: Flag | null;
  readonly reasons: readonly string[];
  readonly resistanceOhm: number | null;
  readonly estimates: readonly Estimate[];
  readonly measured: { readonly noCurrentAt: readonly string[]; readonly seenBy: readonly string[] };
  readonly inferred: { readonly outside: string | null };
  readonly acknowledged: { readonly by: string; readonly atUs: number } | null;
  readonly text: string;
  readonly readOut: string;
}

export function incidentReport(state: IncidentState, network: Network): IncidentReport {
  const { location } = state;
  const isOutside = state.outside !== null;
  const line = isOutside ? undefined : network.lines.find((l) => l.id === location?.lineId);
  const km = isOutside || !location ? null : location.km;
  return {
    incident: state.incident,
    revision: state.revision,
    stage: isOutside ? "outside" : (state.stage ?? "noticed"),
    line: line?.id ?? null,
    phases: isOutside ? null : (location?.phases ?? null),
    onsetUs: state.onsetUs,
    clearedUs: state.clearedUs,
    km: rounded(km, 3),
    kmFromFarEnd: km === null || !line ? null : rounded(line.lengthKm - km, 3),
    stretchKm:
      isOutside || !location?.stretchKm ? null : [rounded(location.stretchKm[0], 3)!, rounded(location.stretchKm[1], 3)!],
    pieces: isOutside
      ? []
      : (location?.pieces ?? []).map((p) => ({
          ...p,
          lowKm: rounded(p.lowKm, 3)!,
          highKm: rounded(p.highKm, 3)!,
          chance: rounded(p.chance, 3)!,
        })),
    towers: isOutside ? null : (location?.spanTowers ?? null),
    flag: isOutside ? null : (location?.flag ?? null),
    reasons: isOutside ? [state.outside!] : (location?.reasons ?? []),
    resistanceOhm: isOutside ? null : rounded(location?.resistanceOhm ?? null, 2),
    estimates: isOutside ? [] : (location?.estimates ?? []),
    measured: { noCurrentAt: state.noCurrentAt, seenBy: state.seenBy },
    inferred: { outside: state.outside },
    acknowledged: state.acknowledged,
    text: firstLine(state, network),
    readOut: readOut(state, network),
  };
}

function rounded(x: number | null, decimals: number): number | null {
  return x === null ? null : Number(x.toFixed(decimals));
}
