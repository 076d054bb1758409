import { describe, expect, it } from "vitest";
import type { FactBody } from "../../alerts/incident/facts.ts";
import { foldIncident } from "../../alerts/incident/fold.ts";
import { incidentId } from "../../alerts/incident/incident-id.ts";
import { incidentReport } from "../../alerts/incident/report.ts";
import { foldEvents } from "../../alerts/index.ts";
import { cleared, ended, located, network, noticed, ONSET_US, outside, wholeStory } from "./samples.ts";

const fold = (...bodies: FactBody[]) =>
  foldIncident(bodies.map((body, k) => ({ seq: k + 1, incidentId: "K7M3", atUs: ONSET_US + k, body })));

describe("the state of an incident", () => {
  it("is folded from its facts", () => {
    expect(fold()).toBeUndefined();
    expect(fold(cleared)).toBeUndefined();
    expect(fold(noticed)).toMatchObject({ stage: null, location: null, isEnded: false, revision: 1 });
    expect(fold(...wholeStory)).toMatchObject({
      stage: "settled",
      clearedUs: ONSET_US + 74_000,
      noCurrentAt: ["brack", "tolva"],
      isEnded: true,
      revision: 6,
    });
  });
  it("keeps the first acknowledgement, whoever comes after", () => {
    const state = fold(
      noticed,
      { kind: "acknowledged", by: "Ada" },
      { kind: "acknowledged", by: "Bo" },
      { kind: "note", by: "Bo", text: "x" },
    );
    expect(state!.acknowledged).toEqual({ by: "Ada", atUs: ONSET_US + 1 });
  });
  it("knows the first place from later ones, and a correction from a refinement", () => {
    expect(fold(noticed, located())).toMatchObject({ isFirstLocation: true, corrects: null });
    expect(fold(noticed, located(), located({ km: 42 }, "refined"))).toMatchObject({ isFirstLocation: false, corrects: null });
    expect(fold(noticed, located(), located({ km: 60 }, "refined"))!.corrects).toMatchObject({ km: 41.27 });
    expect(fold(noticed, located(), located({ lineId: "tolva-quenby-1" }, "refined"))!.corrects).toMatchObject({ km: 41.27 });
  });
});

describe("the report", () => {
  it("holds every field of the contract", () => {
    const [report] = foldEvents(wholeStory, network);
    expect(report).toMatchObject({
      line: "brack-tolva",
      phases: "AG",
      onsetUs: ONSET_US,
      clearedUs: ONSET_US + 74_000,
      km: 41.27,
      kmFromFarEnd: 106.93,
      stretchKm: [39.64, 42.98],
      flag: "firm",
      reasons: ["both ends agree within 0.4 km", "unmixed"],
      resistanceOhm: 4.2,
      stage: "settled",
      towers: { from: "118", to: "119" },
    });
    expect(report!.estimates[0]).toMatchObject({
      method: "two-ended negative sequence",
      terminals: ["brack", "tolva"],
      km: 41.3,
      sdKm: 0.4,
    });
  });
  it("has null for what is not known, and for what lies outside", () => {
    const empty = { line: null, phases: null, clearedUs: null, km: null, stretchKm: null, flag: null, resistanceOhm: null };
    expect(incidentReport(fold(noticed)!, network)).toMatchObject({ ...empty, stage: "noticed" });
    expect(incidentReport(fold(noticed, located(), outside("behind Brack"), ended)!, network)).toMatchObject({
      ...empty,
      stage: "outside",
      reasons: ["behind Brack"],
    });
  });
  it("is one per disturbance, in the order in which they began", () => {
    const second = wholeStory.map((e) => ({ ...e, disturbanceId: "d2" }));
    const mixed = wholeStory.flatMap((e, k) => [e, second[k]!]);
    expect(foldEvents(mixed, network).map((r) => r.stage)).toEqual(["settled", "settled"]);
    expect(new Set(foldEvents(mixed, network).map((r) => r.incident)).size).toBe(2);
  });
});

describe("incident ids", () => {
  it("can be said on the phone, and none comes twice", () => {
    const ids = Array.from({ length: 36_864 }, (_, k) => incidentId(k + 1));
    expect(new Set(ids).size).toBe(ids.length);
    for (const id of ids) expect(id).toMatch(/^[A-HJ-NP-Z][2-9][A-HJ-NP-Z][2-9]$/);
    expect(incidentId(36_865)).toMatch(/^([A-HJ-NP-Z][2-9]){3}$/);
    expect(incidentId(36_865)).not.toBe(incidentId(73_729));
  });
});
