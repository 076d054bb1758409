/**
 * One sentence of 25 words at most, made to be read aloud and repeated back (operators repeat instructions: NERC COM-002-4, from memory). Digits one by one,
 * no abbreviations, nothing that sounds like an order to switch.
 */
import type { Network } from "../../config/index.ts";
import type { IncidentState } from "../incident/fold.ts";
import { isNoFault, kmText } from "./first-line.ts";
import { phaseWords } from "./phases.ts";

const DIGITS = ["zero", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine"];

/** "41.3" -> "four one decimal three" */
const spokenNumber = (text: string): string => [...text].map((c) => (c === "." ? "decimal" : (DIGITS[Number(c)] ?? c))).join(" ");

const MOST_WORDS = 25;

export function readOut(state: IncidentState, network: Network): string {
  const id = `incident ${[...state.incident].join(" ")}`;
  const { location } = state;
  const line = network.lines.find((l) => l.id === (location?.lineId ?? state.lineIds[0]));
  const name = line?.name.replace(/ (\d+)$/, (_, n: string) => ` ${spokenNumber(n)}`) ?? "Unknown line";
  if (state.outside !== null) return isNoFault(state) ? `${name}, not a fault, ${id}.` : `Outside our lines, ${id}.`;
  if (!line || !location) return `${name}, disturbance noticed, place not yet known, ${id}.`;
  const station = network.stations.find((s) => s.id === line.terminals[0]!.stationId)!.name;
  const phases = phaseWords(location.phases, network);
  if (location.km === null) return `${name}, ${phases}, place unknown, ${id}.`;
  const place = `${spokenNumber(kmText(location.km))} kilometres from ${station}`;
  const towers = location.spanTowers;
  const full = `${name}, ${phases}, ${place}${towers ? `, towers ${spokenNumber(towers.from)} to ${spokenNumber(towers.to)}` : ""}, ${location.flag}, ${id}.`;
  return full.split(/\s+/).length <= MOST_WORDS ? full : `${name}, ${phases}, ${place}, ${location.flag}, ${id}.`;
}
