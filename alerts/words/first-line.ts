/**
 * The first line of everything, in a fixed order: line and voltage; phases; place and towers; flag and stretch; what is seen now; time. What is inferred
 * ("tripped") is not said, only what is measured.
 */
import type { Line, Network } from "../../config/index.ts";
import type { Location, Piece } from "../../pipeline/types.ts";
import type { IncidentState } from "../incident/fold.ts";
import { phaseWords } from "./phases.ts";
import { bothTimes } from "./times.ts";

export function firstLine(state: IncidentState, network: Network): string {
  const time = bothTimes(state.onsetUs, network.timeZone);
  const { location } = state;
  const line = network.lines.find((l) => l.id === (location?.lineId ?? state.lineIds[0]));
  const title = line ? `${line.name} ${line.nominalKv} kV` : "Unknown line";
  if (state.outside !== null)
    return isNoFault(state) ? `${title}, ${state.outside}, ${time}` : `Outside the monitored lines: ${state.outside}, ${time}`;
  if (!location || !line) return `${title}, disturbance noticed, place not yet known, ${time}`;
  return [
    title,
    phaseWords(location.phases, network),
    placeWords(location, line, network),
    flagWords(location, line, network),
    seenNow(state, line, network),
    time,
  ]
    .filter((part) => part !== "")
    .join(", ");
}

/** The disturbance was seen, and is no fault anywhere. */
export const isNoFault = (state: IncidentState): boolean => state.outside?.startsWith("not a fault") ?? false;

const stationName = (network: Network, id: string): string => network.stations.find((s) => s.id === id)?.name ?? id;
const firstStation = (line: Line, network: Network): string => stationName(network, line.terminals[0]!.stationId);

/** One decimal: a stretch is never narrower than a few hundred metres. */
export const kmText = (km: number): string => km.toFixed(1);

/** "41.3 km from Brack (towers 118-121)" */
function placeWords(location: Location, line: Line, network: Network): string {
  const from = firstStation(line, network);
  if (location.km === null) return `seen from ${from}, place unknown`;
  const towers = location.pieces[0]?.towers;
  return `${kmText(location.km)} km from ${from}${towers ? ` (towers ${towers.from}-${towers.to})` : ""}`;
}

/** "fair: 39.6-43.0 km"; two pieces: "rough, two places: 57.0-58.3 km (likelier) or 39.1-40.2 km" */
function flagWords(location: Location, line: Line, network: Network): string {
  const range = (p: Piece) => `${kmText(p.lowKm)}-${kmText(p.highKm)} km`;
  const [first, second] = location.pieces;
  if (!first) return location.flag;
  if (!second) return `${location.flag}: ${range(first)}`;
  return `${location.flag}, two places: ${range(first)} (likelier) or ${range(second)} from ${firstStation(line, network)}`;
}

/** "no current at either end" */
function seenNow(state: IncidentState, line: Line, network: Network): string {
  if (state.clearedUs === null)
    return state.stage === "provisional" || state.stage === null ? "so far" : "fault current still flows";
  const measured = line.terminals.filter((t) => t.measured).map((t) => t.stationId);
  const without = state.noCurrentAt;
  if (without.length === 0) return "fault current ended";
  if (measured.length >= 2 && without.length === measured.length)
    return measured.length === 2 ? "no current at either end" : "no current at any measured end";
  return `no current at ${without.map((id) => stationName(network, id)).join(", ")}`;
}
