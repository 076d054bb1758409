/** The present state of an incident, folded from its facts. Pure: the same facts give the same state, in any process and after any restart. */
import type { LocateStage, Location } from "../../pipeline/types.ts";
import type { Fact } from "./facts.ts";

export interface IncidentState {
  readonly incident: string;
  readonly disturbanceId: string;
  /** How many facts it rests on. */
  readonly revision: number;
  readonly onsetUs: number;
  /** Lines of which a terminal saw it. */
  readonly lineIds: readonly string[];
  readonly seenBy: readonly string[];
  readonly stage: LocateStage | null;
  readonly location: Location | null;
  readonly clearedUs: number | null;
  /** Station ids without current in the newest frames (measured). */
  readonly noCurrentAt: readonly string[];
  /** Why it is no fault on a monitored line; null while it may be one. */
  readonly outside: string | null;
  readonly isEnded: boolean;
  readonly acknowledged: { readonly by: string; readonly atUs: number } | null;
  /** The newest fact is the first place that was told. */
  readonly isFirstLocation: boolean;
  /** What was told at the stage before, when the place now lies outside its stretch or on another line. */
  readonly corrects: Pick<Location, "lineId" | "km" | "stretchKm"> | null;
}

/** @returns undefined for no facts, or when the first is not the onset */
export function foldIncident(facts: readonly Fact[]): IncidentState | undefined {
  return facts.reduce<IncidentState | undefined>(withFact, undefined);
}

/** The state after one more fact. */
export function withFact(state: IncidentState | undefined, fact: Fact): IncidentState | undefined {
  const { body } = fact;
  if (!state) {
    if (body.kind !== "noticed") return undefined;
    return {
      incident: fact.incidentId,
      disturbanceId: body.disturbanceId,
      revision: 1,
      onsetUs: body.onsetUs,
      lineIds: body.lineIds,
      seenBy: body.seenBy,
      stage: null,
      location: null,
      clearedUs: null,
      noCurrentAt: [],
      outside: null,
      isEnded: false,
      acknowledged: null,
      isFirstLocation: false,
      corrects: null,
    };
  }
  const next = { ...state, revision: state.revision + 1, isFirstLocation: false };
  switch (body.kind) {
    case "noticed":
      return next;
    case "located":
      return {
        ...next,
        stage: body.stage,
        onsetUs: body.onsetUs,
        clearedUs: body.clearedUs ?? state.clearedUs,
        location: body.location,
        outside: null,
        isFirstLocation: state.location === null,
        corrects: isCorrection(state.location, body.location)
          ? { lineId: state.location!.lineId, km: state.location!.km, stretchKm: state.location!.stretchKm }
          : null,
      };
    case "cleared":
      return { ...next, clearedUs: body.clearedUs, noCurrentAt: body.noCurrentAt };
    case "outside":
      return { ...next, onsetUs: body.onsetUs, outside: body.reason };
    case "ended":
      return { ...next, isEnded: true };
    case "acknowledged":
      return { ...next, acknowledged: state.acknowledged ?? { by: body.by, atUs: fact.atUs } };
    case "note":
      return next;
  }
}

/** The place left the stretch told before, or went to another line. */
function isCorrection(before: Location | null, now: Location): boolean {
  if (!before) return false;
  if (before.lineId !== now.lineId) return true;
  return now.km !== null && before.stretchKm !== null && (now.km < before.stretchKm[0] || now.km > before.stretchKm[1]);
}
