/** An incident is an append-only list of facts. What the pipeline found, and what people did; nothing is ever changed or taken away. */
import type { DisturbanceEvent } from "../../pipeline/types.ts";

export interface Acknowledged {
  readonly kind: "acknowledged";
  readonly by: string;
}

export interface NoteAdded {
  readonly kind: "note";
  readonly by: string;
  readonly text: string;
}

export type FactBody = DisturbanceEvent | Acknowledged | NoteAdded;

export interface Fact {
  /** Ascending over the whole store. */
  readonly seq: number;
  readonly incidentId: string;
  /** When it was written down here, µs since 1970 UTC. */
  readonly atUs: number;
  readonly body: FactBody;
}
