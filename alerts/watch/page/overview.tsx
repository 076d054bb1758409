/** Every line in a fixed order: its wire, its ends and what is known of it now. Lines that need a person open where they are. */
import type { FeedView, WatchedIncident, WatchedLine } from "../protocol.ts";
import { chosen, feeds, incidents, network, serverNowMs } from "./live.ts";
import { Wire } from "./wire.tsx";

/** A frame older than this no longer says what the line does now. */
const OLD_MS = 3_000;

export interface EndSight {
  readonly sees: boolean;
  readonly words: string;
}

/** What one end can see now, with its age or its reason. */
export function sightOf(feed: FeedView | undefined, feedId: string | undefined, nowMs: number): EndSight {
  if (feedId === undefined) return { sees: false, words: "not measured" };
  if (feed?.state !== "live") return { sees: false, words: `cannot see: ${feed?.reason || "no news of its feed"}` };
  const ageMs = feed.newestTimeUs === undefined ? Number.POSITIVE_INFINITY : nowMs - feed.newestTimeUs / 1000;
  if (ageMs > OLD_MS)
    return {
      sees: false,
      words: Number.isFinite(ageMs) ? `cannot see: last frame ${Math.round(ageMs / 1000)} s old` : "cannot see: no frame yet",
    };
  return {
    sees: true,
    words: feed.reason ? `sees, but: ${feed.reason}` : `sees, ${(Math.max(0, ageMs) / 1000).toFixed(1)} s ago`,
  };
}

/** The fault that a line still shows: the newest one that has not been acknowledged, or happened within the last minute. */
function shownOn(line: WatchedLine, all: readonly WatchedIncident[], nowMs: number): WatchedIncident | undefined {
  return all.find(
    (i) => i.lineId === line.id && i.stage !== "outside" && (i.acknowledged === null || nowMs - i.onsetUs / 1000 < 60_000),
  );
}

export function Overview() {
  const net = network.value;
  if (!net) return <p class="waiting">Waiting for the server's first word…</p>;
  return (
    <section aria-labelledby="lines-title">
      <h2 id="lines-title">Lines</h2>
      <p class="legend">A wire between two posts is a line. Weights hang where a fault is likely: how likely, along the line.</p>
      <ul class="lines">
        {net.lines.map((line) => (
          <LineRow key={line.id} line={line} />
        ))}
      </ul>
    </section>
  );
}

function LineRow({ line }: { line: WatchedLine }) {
  const nowMs = serverNowMs.value;
  const sights = line.ends.map((end) =>
    sightOf(end.feedId === undefined ? undefined : feeds.value.get(end.feedId), end.feedId, nowMs),
  );
  const incident = shownOn(line, incidents.value, nowMs);
  const needsPerson = incident !== undefined && incident.acknowledged === null;
  const blind = sights.every((s) => !s.sees);
  const state = incident ? incident.text : blind ? "Cannot see this line" : "No fault noticed";
  return (
    <li class={`line ${needsPerson ? "needs" : ""} ${blind ? "blind" : ""}`}>
      <div class="line-head">
        <span class="line-name">{line.name}</span>
        <span class="line-kv">
          {line.nominalKv} kV, {line.lengthKm} km
        </span>
        {incident && (
          <button type="button" class="open" onClick={() => (chosen.value = incident.incident)}>
            {needsPerson && <span class="mark" aria-hidden="true" />}
            Open {incident.incident}
          </button>
        )}
      </div>
      <div class="line-wire">
        <EndWords name={line.ends[0]!.stationName} sight={sights[0]!} side="left" />
        <Wire line={line} incident={incident} sees={sights.map((s) => s.sees)} size="row" />
        <EndWords name={line.ends.at(-1)!.stationName} sight={sights.at(-1)!} side="right" />
      </div>
      <p class={`line-state ${incident ? "first-line" : ""}`}>{state}</p>
    </li>
  );
}

function EndWords({ name, sight, side }: { name: string; sight: EndSight; side: "left" | "right" }) {
  return (
    <span class={`end ${side} ${sight.sees ? "" : "cannot"}`}>
      <b>{name}</b>
      <span>{sight.words}</span>
    </span>
  );
}
