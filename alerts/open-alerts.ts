/** Everything that reaches people, composed: events in; facts stored, told over every channel, shown on the watch page. */
import { join } from "node:path";
import type { Logger } from "pino";
import { asyncScheduler, type Observable, Subject } from "rxjs";
import type { Network } from "../config/index.ts";
import type { FeedHealth } from "../ingest/types.ts";
import type { DisturbanceEvent } from "../pipeline/types.ts";
import { makeChannels } from "./delivery/channels.ts";
import { Courier } from "./delivery/courier.ts";
import type { Fact } from "./incident/facts.ts";
import { foldIncident } from "./incident/fold.ts";
import { type IncidentReport, incidentReport } from "./incident/report.ts";
import { openSqliteStore } from "./store/sqlite-store.ts";
import type { OutboxEntry } from "./store/store.ts";
import type { ToPage, WatchedIncident } from "./watch/protocol.ts";
import { incidentView, networkView } from "./watch/views.ts";
import { startWatchServer } from "./watch/watch-server.ts";
import { CAUTION, CAUTION_BLOCK } from "./words/caution.ts";
import { messageOf } from "./words/message.ts";

/** Incidents a page gets when it opens. */
const SHOWN_INCIDENTS = 50;
const PULSE_MS = 1_000;

export interface AlertsOptions {
  readonly dataFolder: string;
  /** Of the watch page; 0 for any free one. */
  readonly port: number;
  readonly log: Logger;
  /** Where terminal channels write; left out when the output is for a program. */
  readonly terminal?: NodeJS.WritableStream & { isTTY?: boolean };
  /** µs since 1970 UTC. */
  readonly now?: () => number;
}

export interface Alerts {
  /** Address of the watch page. */
  readonly url: string;
  /** Never throws and never waits for a channel. */
  record(event: DisturbanceEvent): void;
  feeds(health: readonly FeedHealth[]): void;
  /** Each incident's newest report as soon as its fact is stored. */
  readonly reports: Observable<{ readonly report: IncidentReport; readonly kind: string; readonly publishedUs: number }>;
  stop(): Promise<void>;
}

/** @throws StoreError, ChannelError, WatchServerError: reasons not to start, in words */
export async function openAlerts(
  network: Network,
  { dataFolder, port, log, terminal, now = () => Date.now() * 1000 }: AlertsOptions,
): Promise<Alerts> {
  const channels = makeChannels(network.channels, { dataFolder, terminal });
  const store = openSqliteStore(join(dataFolder, "incidents.sqlite"));
  const channelIds = channels.map((c) => c.id);
  const reports = new Subject<{ report: IncidentReport; kind: string; publishedUs: number }>();
  let health: readonly FeedHealth[] = [];

  const deliveryOf = (entry: OutboxEntry) => {
    const facts = store.facts(entry.incidentId).filter((f) => f.seq <= entry.factSeq);
    const state = foldIncident(facts);
    const fact = facts.at(-1);
    const message = state && fact && messageOf(fact.body, state, network);
    return message && { key: entry.key, message, report: incidentReport(state, network), atUs: fact.atUs };
  };
  const couriers = channels.map(
    (channel) =>
      new Courier({
        store,
        channel,
        clock: asyncScheduler,
        deliveryOf,
        random: Math.random,
        onTrouble: (words, isSetAside) =>
          log.warn({ channel: channel.id }, isSetAside ? `${words}: set aside after many tries` : words),
      }),
  );
  const views = (): WatchedIncident[] =>
    store.newest(SHOWN_INCIDENTS).flatMap((id) => incidentView(store.facts(id), network) ?? []);
  const hello = (): ToPage => ({
    kind: "hello",
    serverTimeUs: now(),
    network: networkView(network, now()),
    incidents: views(),
    feeds: health,
    caution: CAUTION,
    cautionBlock: CAUTION_BLOCK,
  });

  const stored = (fact: Fact) => {
    const facts = store.facts(fact.incidentId);
    const view = incidentView(facts, network);
    if (view) watch.tell({ kind: "incident", serverTimeUs: now(), incident: view });
    const state = foldIncident(facts);
    if (state) reports.next({ report: incidentReport(state, network), kind: fact.body.kind, publishedUs: now() });
    for (const courier of couriers) courier.look();
  };
  const acknowledge = (incident: string, by: string): string | undefined => {
    const state = foldIncident(store.facts(incident));
    if (!state) return `no incident ${incident}`;
    if (state.acknowledged) return `incident ${incident} was acknowledged by ${state.acknowledged.by}`;
    stored(store.append(incident, { kind: "acknowledged", by }, now(), channelIds));
    return undefined;
  };

  let watch: Awaited<ReturnType<typeof startWatchServer>>;
  try {
    watch = await startWatchServer({
      port,
      hello,
      acknowledge,
      health: () => ({
        status: "running",
        timeUs: now(),
        feedsLive: health.filter((f) => f.state === "live").length,
        feeds: health.length,
        outbox: store.counts(),
      }),
    });
  } catch (error) {
    store.close();
    throw error;
  }
  // What a former run left undelivered goes out first.
  for (const courier of couriers) courier.look();
  const pulse = setInterval(
    () => watch.tell({ kind: "pulse", serverTimeUs: now(), feeds: health, undelivered: store.counts().waiting }),
    PULSE_MS,
  );
  let isStopped = false;

  return {
    url: watch.url,
    reports: reports.asObservable(),
    record(event) {
      try {
        const known = store.incidentOf(event.disturbanceId);
        if (!known && event.kind !== "noticed") return;
        stored(known ? store.append(known, event, now(), channelIds) : store.open(event.disturbanceId, event, now(), channelIds));
      } catch (error) {
        log.error({ err: error, event: event.kind }, "a fact could not be stored: see the data folder's disk");
      }
    },
    feeds(newHealth) {
      health = newHealth;
    },
    async stop() {
      if (isStopped) return;
      isStopped = true;
      clearInterval(pulse);
      await Promise.all(couriers.map((courier) => courier.stop()));
      await watch.stop();
      for (const channel of channels) await channel.close?.();
      reports.complete();
      store.close();
    },
  };
}
