/** From the network and an incident's facts to what the page is sent. */
import type { Network } from "../../config/index.ts";
import type { Fact } from "../incident/facts.ts";
import { foldIncident, type IncidentState, withFact } from "../incident/fold.ts";
import { firstLine } from "../words/first-line.ts";
import { messageOf } from "../words/message.ts";
import { phaseWords } from "../words/phases.ts";
import { readOut } from "../words/read-out.ts";
import { offsetMinutes } from "../words/times.ts";
import type { HistoryLine, WatchedIncident, WatchedNetwork } from "./protocol.ts";

export function networkView(network: Network, nowUs: number): WatchedNetwork {
  const nameOf = (id: string) => network.stations.find((s) => s.id === id)?.name ?? id;
  return {
    name: network.name,
    frequencyHz: network.frequencyHz,
    timeZone: network.timeZone,
    offsetMinutes: offsetMinutes(nowUs, network.timeZone),
    lines: network.lines.map((line) => ({
      id: line.id,
      name: line.name,
      nominalKv: line.nominalKv,
      lengthKm: line.lengthKm,
      ends: line.terminals.map((t) => ({
        stationId: t.stationId,
        stationName: nameOf(t.stationId),
        ...(t.measured ? { feedId: t.measured.feedId } : {}),
      })),
      spanKm: line.towers.length > 1 ? (line.towers.at(-1)!.km - line.towers[0]!.km) / (line.towers.length - 1) : 0,
    })),
  };
}

export function incidentView(facts: readonly Fact[], network: Network): WatchedIncident | undefined {
  const state = foldIncident(facts);
  if (!state) return undefined;
  const { location } = state;
  return {
    incident: state.incident,
    revision: state.revision,
    stage: state.outside === null ? (state.stage ?? "noticed") : "outside",
    lineId: state.outside === null ? (location?.lineId ?? state.lineIds[0] ?? null) : null,
    onsetUs: state.onsetUs,
    clearedUs: state.clearedUs,
    text: firstLine(state, network),
    readOut: readOut(state, network),
    phases: location ? phaseWords(location.phases, network) : null,
    location,
    isEnded: state.isEnded,
    acknowledged: state.acknowledged,
    history: historyOf(facts, network),
  };
}

function historyOf(facts: readonly Fact[], network: Network): HistoryLine[] {
  let state: IncidentState | undefined;
  return facts.flatMap((fact) => {
    state = withFact(state, fact);
    const message = state && messageOf(fact.body, state, network);
    return message ? [{ atUs: fact.atUs, head: message.head, text: message.lines[0]! }] : [];
  });
}
