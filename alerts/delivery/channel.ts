/** A way to people. Each kind is one small file with its settings' schema; `channelKinds` in `channels.ts` lists them. */
import type { IncidentReport } from "../incident/report.ts";
import type { Message } from "../words/message.ts";

export interface Delivery {
  /** Same on every attempt. */
  readonly key: string;
  readonly message: Message;
  readonly report: IncidentReport;
  /** When the fact was written down, µs since 1970 UTC. */
  readonly atUs: number;
}

export interface Channel {
  readonly id: string;
  /** Resolves when the receiver has taken it; rejects with the reason in words. Must be bounded in time. */
  deliver(delivery: Delivery): Promise<void>;
  close?(): Promise<void>;
}
