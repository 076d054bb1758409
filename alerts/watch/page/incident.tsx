/** One incident: first line, the loaded wire, how sure and why, the methods, the time line, the caution; and "I have seen it". */
import { useSignal } from "@preact/signals";
import type { WatchedIncident, WatchedLine } from "../protocol.ts";
import { day, local, utc } from "./clock.ts";
import { caution, cautionBlock, chosen, feeds, network, refusal, send, serverNowMs } from "./live.ts";
import { sightOf } from "./overview.tsx";
import { placeOnWire, Wire } from "./wire.tsx";

const STAGES: Readonly<Record<WatchedIncident["stage"], string>> = {
  noticed: "Noticed, being located",
  provisional: "So far",
  refined: "Refined",
  settled: "Settled",
  outside: "Outside the monitored lines",
};

export function IncidentView({ incident }: { incident: WatchedIncident }) {
  const net = network.value;
  const line = net?.lines.find((l) => l.id === incident.lineId);
  return (
    <article class="incident" aria-labelledby="incident-title">
      <header>
        <p class="stage">
          Incident <b>{incident.incident}</b>, revision {incident.revision}: {STAGES[incident.stage]},{" "}
          {day(incident.onsetUs / 1000)}
        </p>
        <h2 id="incident-title">{incident.text}</h2>
        <button type="button" class="plain" onClick={() => (chosen.value = undefined)}>
          Close
        </button>
      </header>
      {line && <Drawing incident={incident} line={line} />}
      <Acknowledge incident={incident} />
      <div class="columns">
        {incident.location && (
          <section aria-labelledby="why">
            <h3 id="why">Why {incident.location.flag}</h3>
            <ul class="reasons">
              {incident.location.reasons.map((reason) => (
                <li key={reason}>{reason}</li>
              ))}
            </ul>
            <h3>Read out</h3>
            <p class="readout">{incident.readOut}</p>
          </section>
        )}
        <section aria-labelledby="course">
          <h3 id="course">What happened</h3>
          <ol class="history">
            {incident.history.map((h) => (
              <li key={h.atUs + h.head}>
                <time>{utc(h.atUs / 1000)}</time> <b>{h.head}</b> <span>{h.text}</span>
              </li>
            ))}
          </ol>
        </section>
      </div>
      {incident.location && <Methods incident={incident} />}
      <aside class="caution">
        <p>
          <strong>{caution.value}</strong>
        </p>
        <details>
          <summary>WARNING: the whole caution</summary>
          <p>{cautionBlock.value}</p>
        </details>
      </aside>
    </article>
  );
}

function Drawing({ incident, line }: { incident: WatchedIncident; line: WatchedLine }) {
  const nowMs = serverNowMs.value;
  const sees = line.ends.map(
    (end) => sightOf(end.feedId === undefined ? undefined : feeds.value.get(end.feedId), end.feedId, nowMs).sees,
  );
  const { location } = incident;
  const left = line.ends[0]!.stationName;
  const right = line.ends.at(-1)!.stationName;
  return (
    <figure class="drawing">
      <div class="posts">
        <b>{left}</b>
        <span>how likely, along the line</span>
        <b>{right}</b>
      </div>
      <div class="wire-with-figures">
        {location?.pieces.map((piece, k) => (
          <span
            key={piece.lowKm}
            class={`figures ${k === 0 ? "likelier" : ""}`}
            style={{ left: `${placeOnWire((piece.lowKm + piece.highKm) / 2, line.lengthKm)}%` }}
          >
            {piece.lowKm.toFixed(1)}-{piece.highKm.toFixed(1)} km
            {piece.towers && (
              <span>
                towers {piece.towers.from}-{piece.towers.to}
              </span>
            )}
          </span>
        ))}
        <Wire line={line} incident={incident} sees={sees} size="incident" />
      </div>
      {location && (
        <dl class="facts">
          <Fact
            name="Place"
            value={
              location.km === null
                ? "unknown"
                : `${location.km.toFixed(1)} km from ${left}, ${(line.lengthKm - location.km).toFixed(1)} km from ${right}`
            }
          />
          <Fact
            name="Span"
            value={location.spanTowers ? `towers ${location.spanTowers.from}-${location.spanTowers.to}` : "no tower list"}
          />
          <Fact
            name="90% stretch"
            value={
              location.pieces
                .map(
                  (p) =>
                    `${p.lowKm.toFixed(1)}-${p.highKm.toFixed(1)} km${p.towers ? ` (towers ${p.towers.from}-${p.towers.to})` : ""}`,
                )
                .join(" or ") || "none"
            }
          />
          <Fact name="Phases" value={incident.phases ?? "unknown"} />
          <Fact
            name="Resistance"
            value={location.resistanceOhm === null ? "not known" : `${location.resistanceOhm.toFixed(1)} ohm`}
          />
          <Fact
            name="Fault current"
            value={
              incident.clearedUs === null
                ? "still flows, or its end was not seen"
                : `ended after ${Math.round((incident.clearedUs - incident.onsetUs) / 1000)} ms`
            }
          />
        </dl>
      )}
    </figure>
  );
}

function Fact({ name, value }: { name: string; value: string }) {
  return (
    <div>
      <dt>{name}</dt>
      <dd>{value}</dd>
    </div>
  );
}

function Acknowledge({ incident }: { incident: WatchedIncident }) {
  const by = useSignal(localStorage.getItem("spanmark-name") ?? "");
  const offset = network.value?.offsetMinutes ?? 0;
  if (incident.acknowledged) {
    const at = incident.acknowledged.atUs / 1000;
    return (
      <p class="acknowledged">
        Seen by {incident.acknowledged.by}, {utc(at)} ({local(at, offset)})
      </p>
    );
  }
  return (
    <form
      class="acknowledge"
      onSubmit={(event) => {
        event.preventDefault();
        const name = by.value.trim();
        if (name === "") return;
        localStorage.setItem("spanmark-name", name);
        send({ kind: "acknowledge", incident: incident.incident, by: name });
      }}
    >
      <label>
        Your name{" "}
        <input
          name="by"
          value={by.value}
          required
          maxLength={80}
          autocomplete="name"
          onInput={(e) => (by.value = e.currentTarget.value)}
        />
      </label>
      <button type="submit">I have seen it</button>
      {refusal.value && <p role="alert">{refusal.value}</p>}
    </form>
  );
}

function Methods({ incident }: { incident: WatchedIncident }) {
  return (
    <section aria-labelledby="methods">
      <h3 id="methods">What each method says</h3>
      {/* Scrolls sideways on a phone: it must take the keyboard's focus for that. */}
      {/* biome-ignore lint/a11y/useSemanticElements: a table in a scroll box is no set of form fields */}
      {/* biome-ignore lint/a11y/noNoninteractiveTabindex: axe scrollable-region-focusable */}
      <div class="scroll" tabIndex={0} role="group" aria-labelledby="methods">
        <table>
          <thead>
            <tr>
              <th scope="col">Method</th>
              <th scope="col">From</th>
              <th scope="col">Place, km</th>
              <th scope="col">± sd, km</th>
              <th scope="col">Counts</th>
              <th scope="col">Frames</th>
            </tr>
          </thead>
          <tbody>
            {incident.location!.estimates.map((e) => (
              <tr key={e.method + e.terminals.join()}>
                <th scope="row">{e.method}</th>
                <td>{e.terminals.map((id) => nameOf(id)).join(", ")}</td>
                <td class="number">{e.km.toFixed(1)}</td>
                <td class="number">{e.sdKm.toFixed(1)}</td>
                <td class="number">{e.weight > 0 ? `${Math.round(e.weight * 100)} %` : "shown only"}</td>
                <td>{e.frames}</td>
              </tr>
            ))}
          </tbody>
        </table>
      </div>
    </section>
  );
}

const nameOf = (stationId: string): string =>
  network.value?.lines.flatMap((l) => l.ends).find((end) => end.stationId === stationId)?.stationName ?? stationId;
