/** Where incidents and what is to be told live. One contract test suite runs against every kind. */
import type { Fact, FactBody } from "../incident/facts.ts";

export interface OutboxEntry {
  readonly seq: number;
  /** Same on every attempt: receivers can tell a repeat by it. */
  readonly key: string;
  readonly channelId: string;
  readonly incidentId: string;
  readonly factSeq: number;
  readonly tries: number;
  /** Not before, µs since 1970 UTC. */
  readonly notBeforeUs: number;
}

export interface IncidentStore {
  /** Writes a disturbance's first fact, and one outbox entry per channel, in one transaction; returns the new incident's fact. An incident that exists already is added to. */
  open(disturbanceId: string, body: FactBody, atUs: number, channelIds: readonly string[]): Fact;
  /** Adds a fact and its outbox entries in one transaction. */
  append(incidentId: string, body: FactBody, atUs: number, channelIds: readonly string[]): Fact;
  incidentOf(disturbanceId: string): string | undefined;
  facts(incidentId: string): Fact[];
  /** Newest first. */
  newest(limit: number): string[];
  /** For one channel: the oldest undelivered entry of each incident that is due. */
  due(channelId: string, nowUs: number): OutboxEntry[];
  /** When the earliest of those entries is due, µs since 1970 UTC, also in the past; undefined when nothing waits. */
  nextDueUs(channelId: string): number | undefined;
  delivered(seq: number): void;
  failed(seq: number, error: string, notBeforeUs: number): void;
  setAside(seq: number, error: string): void;
  /** Undelivered, and set aside, over all channels. */
  counts(): { readonly waiting: number; readonly setAside: number };
  close(): void;
}
