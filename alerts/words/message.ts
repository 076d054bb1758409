/** What a person is told at one fact of an incident: lines of plain text, the most important first. */
import type { Network } from "../../config/index.ts";
import type { Location } from "../../pipeline/types.ts";
import type { FactBody } from "../incident/facts.ts";
import type { IncidentState } from "../incident/fold.ts";
import { CAUTION } from "./caution.ts";
import { firstLine, isNoFault, kmText } from "./first-line.ts";
import { bothTimes } from "./times.ts";

export interface Message {
  /** One or two words: what this message is. */
  readonly head: string;
  readonly lines: readonly string[];
  /** A fault on a line that needs a person, or a correction of one. */
  readonly isAlarm: boolean;
}

/** @returns undefined for facts that nobody is told of */
export function messageOf(body: FactBody, state: IncidentState, network: Network): Message | undefined {
  const id = `incident ${state.incident}`;
  const line = network.lines.find((l) => l.id === state.location?.lineId);
  const name = (stationId: string) => network.stations.find((s) => s.id === stationId)?.name ?? stationId;
  switch (body.kind) {
    case "noticed":
      return { head: "Noticed", lines: [`${firstLine(state, network)}, ${id}`], isAlarm: false };
    case "located": {
      const correction = state.corrects ? correctionWords(state.corrects, body.location, network) : undefined;
      const far =
        line && body.location.km !== null
          ? [`${kmText(line.lengthKm - body.location.km)} km from ${name(line.terminals.at(-1)!.stationId)}`]
          : [];
      const span = body.location.spanTowers ? [`span ${body.location.spanTowers.from}-${body.location.spanTowers.to}`] : [];
      const ohm =
        body.location.resistanceOhm === null
          ? []
          : [`${body.location.resistanceOhm.toFixed(body.location.resistanceOhm < 10 ? 1 : 0)} ohm`];
      return {
        head: correction ? "Correction" : { provisional: "Located, so far", refined: "Located", settled: "Settled" }[body.stage],
        lines: [
          ...(correction ? [correction] : []),
          `${firstLine(state, network)}, ${id}`,
          [...span, ...far, ...ohm].join(", "),
          `Why: ${body.location.reasons.join("; ")}`,
          CAUTION,
        ].filter((l) => l !== ""),
        isAlarm: state.isFirstLocation || correction !== undefined,
      };
    }
    case "cleared": {
      const where =
        body.noCurrentAt.length > 0
          ? `No current at ${body.noCurrentAt.map(name).join(" and ")} since ${bothTimes(body.clearedUs, network.timeZone)}`
          : `Fault current ended at ${bothTimes(body.clearedUs, network.timeZone)}`;
      const ms = Math.round((body.clearedUs - state.onsetUs) / 1000);
      return { head: "Cleared", lines: [`${where}, after ${ms} ms, ${id}`], isAlarm: false };
    }
    case "outside":
      return state.location
        ? {
            head: "Correction",
            lines: [
              `CORRECTION: no fault on ${line?.name ?? "the line"}, as was told before`,
              `${firstLine(state, network)}, ${id}`,
            ],
            isAlarm: true,
          }
        : { head: isNoFault(state) ? "No fault" : "Outside", lines: [`${firstLine(state, network)}, ${id}`], isAlarm: false };
    case "acknowledged":
      return { head: "Acknowledged", lines: [`${id} acknowledged by ${body.by}`], isAlarm: false };
    case "note":
    case "ended":
      return undefined;
  }
}

type Told = Pick<Location, "lineId" | "km">;

/** Both places. Two distances from one station can be compared; on two lines, each is named with its station and line. */
function correctionWords(was: Told, now: Told, network: Network): string {
  const station = (place: Told) => {
    const first = network.lines.find((l) => l.id === place.lineId)?.terminals[0]?.stationId;
    return network.stations.find((s) => s.id === first)?.name ?? "the first station";
  };
  if (was.lineId === now.lineId && was.km !== null && now.km !== null)
    return `CORRECTION: was ${kmText(was.km)} km, now ${kmText(now.km)} km from ${station(now)}`;
  const whole = (place: Told) =>
    `${place.km === null ? "place unknown" : `${kmText(place.km)} km from ${station(place)}`} on ${network.lines.find((l) => l.id === place.lineId)?.name ?? place.lineId}`;
  return `CORRECTION: was ${whole(was)}, now ${whole(now)}`;
}
