/** The pipeline's events as incident reports, without a store: what `locate` prints. */
import type { Network } from "../config/index.ts";
import type { DisturbanceEvent } from "../pipeline/types.ts";
import { type IncidentState, withFact } from "./incident/fold.ts";
import { incidentId } from "./incident/incident-id.ts";
import { type IncidentReport, incidentReport } from "./incident/report.ts";

/** One report per disturbance, in the order in which they began, as the last event leaves it. Ids count from the first of this run. */
export function foldEvents(events: Iterable<DisturbanceEvent>, network: Network): IncidentReport[] {
  const states = new Map<string, IncidentState>();
  let seq = 0;
  for (const body of events) {
    const before = states.get(body.disturbanceId);
    const id = before?.incident ?? incidentId(states.size + 1);
    const state = withFact(before, { seq: ++seq, incidentId: id, atUs: body.dataTimeUs, body });
    if (state) states.set(body.disturbanceId, state);
  }
  return [...states.values()].map((state) => incidentReport(state, network));
}
