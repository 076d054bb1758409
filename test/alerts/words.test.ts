import { describe, expect, it } from "vitest";
import type { FactBody } from "../../alerts/incident/facts.ts";
import { type IncidentState, withFact } from "../../alerts/incident/fold.ts";
import { CAUTION, CAUTION_BLOCK } from "../../alerts/words/caution.ts";
import { firstLine } from "../../alerts/words/first-line.ts";
import { messageOf } from "../../alerts/words/message.ts";
import { phaseWords } from "../../alerts/words/phases.ts";
import { readOut } from "../../alerts/words/read-out.ts";
import { bothTimes } from "../../alerts/words/times.ts";
import { faultTypes } from "../../pipeline/types.ts";
import { cleared, located, network, noticed, ONSET_US, outside, wholeStory } from "./samples.ts";

const stateAfter = (...bodies: FactBody[]): IncidentState =>
  bodies.reduce<IncidentState | undefined>(
    (state, body, k) => withFact(state, { seq: k + 1, incidentId: "K7M3", atUs: ONSET_US + 200_000, body }),
    undefined,
  )!;
const told = (...bodies: FactBody[]) => messageOf(bodies.at(-1)!, stateAfter(...bodies), network)!;

describe("the first line", () => {
  it("has line, voltage, phases, place, towers, flag, stretch, what is seen, both times, in this order", () => {
    expect(firstLine(stateAfter(noticed, located(), cleared, located({}, "refined", ONSET_US + 74_000)), network)).toBe(
      "Brack-Tolva 230 kV, A to ground, 41.3 km from Brack (towers 118-121), fair: 39.6-43.0 km, no current at either end, 02:14:07 UTC (03:14 +01:00)",
    );
  });
  it("says what is not yet known", () => {
    expect(firstLine(stateAfter(noticed), network)).toBe(
      "Brack-Tolva 230 kV, disturbance noticed, place not yet known, 02:14:07 UTC (03:14 +01:00)",
    );
    expect(firstLine(stateAfter(noticed, located()), network)).toContain(", so far, 02:14:07");
    expect(firstLine(stateAfter(noticed, located({}, "settled")), network)).toContain(", fault current still flows, ");
  });
  it("names two places, the likelier first", () => {
    const pieces = [
      { lowKm: 57, highKm: 58.3, chance: 0.6 },
      { lowKm: 39.1, highKm: 40.2, chance: 0.3 },
    ];
    expect(firstLine(stateAfter(noticed, located({ flag: "rough", km: 57.5, pieces }, "settled")), network)).toBe(
      "Brack-Tolva 230 kV, A to ground, 57.5 km from Brack, rough, two places: 57.0-58.3 km (likelier) or 39.1-40.2 km from Brack, fault current still flows, 02:14:07 UTC (03:14 +01:00)",
    );
  });
  it("says of a place that is unknown that it is", () => {
    expect(
      firstLine(
        stateAfter(noticed, located({ flag: "direction only", km: null, pieces: [], stretchKm: null }, "settled")),
        network,
      ),
    ).toContain("A to ground, seen from Brack, place unknown, direction only");
  });
  it("tells what lies outside the lines from what is no fault", () => {
    expect(firstLine(stateAfter(noticed, outside("behind Brack, seen from Brack-Tolva")), network)).toBe(
      "Outside the monitored lines: behind Brack, seen from Brack-Tolva, 02:14:07 UTC (03:14 +01:00)",
    );
    expect(firstLine(stateAfter(noticed, outside("not a fault: line switched in")), network)).toBe(
      "Brack-Tolva 230 kV, not a fault: line switched in, 02:14:07 UTC (03:14 +01:00)",
    );
  });
  it("uses the utility's own phase names", () => {
    expect(faultTypes.map((t) => phaseWords(t, { phaseNames: ["R", "Y", "B"] }))).toEqual([
      "R to ground",
      "Y to ground",
      "B to ground",
      "R to Y",
      "Y to B",
      "B to R",
      "R and Y to ground",
      "Y and B to ground",
      "B and R to ground",
      "R, Y and B",
    ]);
  });
});

describe("messages", () => {
  it("of a located fault: place, span, both distances, why, caution", () => {
    expect(told(noticed, located())).toEqual({
      head: "Located, so far",
      isAlarm: true,
      lines: [
        "Brack-Tolva 230 kV, A to ground, 41.3 km from Brack (towers 118-121), fair: 39.6-43.0 km, so far, 02:14:07 UTC (03:14 +01:00), incident K7M3",
        "span 118-119, 106.9 km from Tolva, 4.2 ohm",
        "Why: both ends agree within 0.4 km; unmixed",
        CAUTION,
      ],
    });
  });
  it("of a place that left the stretch told before: a correction, as loud as what it corrects, with both places", () => {
    const message = told(noticed, located(), located({ km: 67, stretchKm: [66, 68] }, "refined"));
    expect(message).toMatchObject({ head: "Correction", isAlarm: true });
    expect(message.lines[0]).toBe("CORRECTION: was 41.3 km, now 67.0 km from Brack");
    expect(told(noticed, located(), located({ km: 42 }, "refined"))).toMatchObject({ head: "Located", isAlarm: false });
  });
  it("of a fault that is on another line: a correction that names both lines, not two distances that cannot be compared", () => {
    const elsewhere = located({ lineId: "tolva-quenby-1", km: 12, pieces: [], stretchKm: [11, 13] }, "refined");
    const message = told(noticed, located(), elsewhere);
    expect(message).toMatchObject({ head: "Correction", isAlarm: true });
    expect(message.lines[0]).toBe("CORRECTION: was 41.3 km from Brack on Brack-Tolva, now 12.0 km from Tolva on Tolva-Quenby 1");
    const unknown = located(
      { lineId: "tolva-quenby-1", km: null, pieces: [], stretchKm: null, flag: "direction only" },
      "refined",
    );
    expect(told(noticed, located(), unknown)).toMatchObject({ head: "Correction", isAlarm: true });
    expect(told(noticed, located(), unknown).lines[0]).toBe(
      "CORRECTION: was 41.3 km from Brack on Brack-Tolva, now place unknown on Tolva-Quenby 1",
    );
  });
  it("of a fault that turned out to be none: a correction", () => {
    expect(told(noticed, located(), outside("not a fault: line switched in"))).toMatchObject({
      head: "Correction",
      isAlarm: true,
    });
  });
  it("of the end of the fault current: measured, not inferred", () => {
    expect(told(noticed, located(), cleared).lines).toEqual([
      "No current at Brack and Tolva since 02:14:07 UTC (03:14 +01:00), after 74 ms, incident K7M3",
    ]);
  });
});

describe("the sentence to read out", () => {
  it("has digits one by one and at most 25 words", () => {
    const text = readOut(stateAfter(noticed, located()), network);
    expect(text).toBe(
      "Brack-Tolva, A to ground, four one decimal three kilometres from Brack, towers one one eight to one one nine, fair, incident K 7 M 3.",
    );
    for (const body of [noticed, ...wholeStory.slice(1), outside("behind Brack")]) {
      const sentence = readOut(stateAfter(noticed, body), network);
      expect(sentence.split(/\s+/).length).toBeLessThanOrEqual(25);
      expect(sentence.replace(/incident.*$/, "")).not.toMatch(/\d/);
    }
  });
  it("does so on every line, at every stage", () => {
    for (const { id, lengthKm } of network.lines)
      for (const phases of faultTypes)
        for (const km of [0, lengthKm / 3, lengthKm, null]) {
          const place = { lineId: id, phases, km, spanTowers: { from: "1118", to: "1119" }, flag: "direction only" as const };
          for (const state of [stateAfter({ ...noticed, lineIds: [id] }), stateAfter(noticed, located(place))]) {
            const sentence = readOut(state, network);
            expect(sentence.split(/\s+/).length, sentence).toBeLessThanOrEqual(25);
            expect(sentence.replace(/incident.*$/, "")).not.toMatch(/\d|\bkm\b|\bkV\b/);
          }
        }
  });
  it("does not say of what is no fault that it lies outside", () => {
    expect(readOut(stateAfter(noticed, outside("not a fault: line switched in")), network)).toBe(
      "Brack-Tolva, not a fault, incident K 7 M 3.",
    );
    expect(readOut(stateAfter(noticed, outside("behind Brack")), network)).toBe("Outside our lines, incident K 7 M 3.");
  });
});

it("times are UTC first, then the control room's with its offset, also across midnight and half hours", () => {
  expect(bothTimes(Date.UTC(2026, 2, 4, 23, 40, 9) * 1000, "Asia/Kolkata")).toBe("23:40:09 UTC (05:10 +05:30)");
  expect(bothTimes(Date.UTC(2026, 6, 4, 1, 0, 0) * 1000, "America/New_York")).toBe("01:00:00 UTC (21:00 -04:00)");
});

describe("words that are not ours to say", () => {
  const texts = [
    ...[
      noticed,
      ...wholeStory.slice(1),
      outside("behind Brack"),
      outside("not a fault: line switched in"),
      located({ km: 67, stretchKm: [66, 68] }),
      located({ lineId: "tolva-quenby-1", km: 12, stretchKm: [11, 13] }),
    ].flatMap((body) => {
      const state = stateAfter(noticed, located(), body);
      return [firstLine(state, network), readOut(state, network), ...(messageOf(body, state, network)?.lines ?? [])];
    }),
    CAUTION,
  ];
  it("never stand in a text", () => {
    for (const text of texts) {
      expect(text).not.toMatch(/\b(dead|safe|isolated|de-energi[sz]ed|confirmed|exact|tripped|reclosed)\b/i);
      expect(text).not.toMatch(/DANGER|WARNING|CAUTION/);
    }
  });
  it("the caution names no distance", () => {
    expect(CAUTION_BLOCK).not.toMatch(/\d/);
    expect(CAUTION_BLOCK).toContain("keep the distance your rules give");
  });
});
