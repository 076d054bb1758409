import { mkdtempSync, readdirSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { afterAll, describe, expect, it } from "vitest";
import { demoNetworkPath, loadNetwork } from "../../config/index.ts";
import { decodeConfig, Framer, timeUsOf, typeOf } from "../../ingest/index.ts";
import { checkedScenario, namedScenario, ScenarioError, scenarioNames, writeScenario } from "../../simulator/index.ts";

const folder = mkdtempSync(join(tmpdir(), "spanmark-scenario-"));
afterAll(() => rmSync(folder, { recursive: true }));
const network = loadNetwork(demoNetworkPath());

/** Slots of the data frames of a recording, which must begin with a configuration and hold nothing defective. */
function slotsOf(path: string, idCode: number, rateHz: number): number[] {
  const slots: number[] = [];
  const types: string[] = [];
  let defects = 0;
  const framer = new Framer({
    frame(bytes, at, size) {
      const type = typeOf(bytes[at + 1]!);
      if (types.length === 0) expect(decodeConfig(bytes, at, size).idCode).toBe(idCode);
      types.push(String(type));
      const view = new DataView(bytes.buffer, bytes.byteOffset + at);
      if (type === "data") slots.push(Math.round((timeUsOf(view.getUint32(6), view.getUint32(10), 1_000_000) * rateHz) / 1e6));
    },
    defect() {
      defects++;
    },
  });
  framer.push(readFileSync(path));
  expect(defects).toBe(0);
  expect(types[0]).toBe("configuration-2");
  expect(types.length).toBe(slots.length + 1);
  return slots;
}

describe("scenarios", () => {
  it("has one in which nothing happens, and faults of several kinds on several lines", () => {
    const faults = scenarioNames().flatMap((name) => namedScenario(name).fault?.type ?? []);
    expect(scenarioNames().length - faults.length).toBe(1);
    expect(new Set(faults).size).toBeGreaterThan(3);
    expect(() => namedScenario("storm")).toThrow(/no scenario "storm"; there are quiet, brack-tolva-a-ground/);
  });

  it.each(scenarioNames())("%s: a recording of every feed, and its truth", async (name) => {
    const scenario = checkedScenario(namedScenario(name), network);
    const { truth, recordings } = await writeScenario(network, scenario, join(folder, name));
    expect([...recordings.keys()].sort()).toEqual(network.feeds.map((f) => f.id).sort());
    expect(readdirSync(join(folder, name)).length).toBe(network.feeds.length + 1);
    const told = JSON.parse(readFileSync(join(folder, name, "truth.json"), "utf8")).truth;
    expect(told).toEqual(truth ?? null);
    for (const feed of network.feeds) {
      const first = scenario.startS * feed.reportingRateHz;
      const slots = slotsOf(recordings.get(feed.id)!, feed.idCode, feed.reportingRateHz);
      expect(slots).toEqual(Array.from({ length: scenario.durationS * feed.reportingRateHz }, (_, k) => first + k));
    }
    expect(truth === undefined).toBe(scenario.fault === undefined);
    if (!truth) return;
    expect(truth.onsetUs).toBe((scenario.startS + scenario.fault!.atS) * 1e6);
    expect(truth).toMatchObject({ line: scenario.line, phases: scenario.fault!.type, km: scenario.fault!.km });
    expect(truth.clearedUs - truth.onsetUs).toBeGreaterThan(50_000);
    expect(truth.clearedUs - truth.onsetUs).toBeLessThan(120_000);
  });

  it("the same seed gives the same bytes, another seed others", async () => {
    const bytes = async (seed: number, name: string) => {
      const { recordings } = await writeScenario(
        network,
        { ...namedScenario("quiet"), durationS: 0.5, seed },
        join(folder, name),
      );
      return readFileSync(recordings.get("brack-tolva-at-brack")!);
    };
    const first = await bytes(1, "s1");
    expect((await bytes(1, "s2")).equals(first)).toBe(true);
    expect((await bytes(2, "s3")).equals(first)).toBe(false);
  });

  it.each([
    [{ line: "brack-nolde" }, /no line "brack-nolde" in Marrow Coast; it has brack-tolva/],
    [{ line: "brack-tolva", fault: { type: "AG", km: 200, ohm: 1 } }, /the fault lies at km 200, Brack-Tolva ends at 148.2 km/],
    [{ line: "brack-tolva", fault: { type: "AG", km: 20, ohm: -1 } }, /expected number to be >=0\s.*fault\.ohm/],
    [{ line: "brack-tolva", fault: { type: "AX", km: 20, ohm: 1 } }, /fault\.type/],
    [{ line: "brack-tolva", wind: 3 }, /wind/],
  ])("%j is refused in words", (scenario, words) => {
    expect(() => checkedScenario(scenario, network)).toThrow(ScenarioError);
    expect(() => checkedScenario(scenario, network)).toThrow(words);
  });
});
