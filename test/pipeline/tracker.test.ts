import { describe, expect, it } from "vitest";
import type { Network } from "../../config/index.ts";
import { DisturbanceTracker } from "../../pipeline/index.ts";
import type { DisturbanceEvent, FaultLocated } from "../../pipeline/types.ts";
import { type EndPhasorSet, example, solve, type TwoSource } from "../published/two-source-network.ts";
import { blocksOf, type Course } from "./frames.ts";
import { plainNetwork } from "./network.ts";

const M60 = { pmuClass: "M", reportingRateHz: 60 } as const;
const M30 = { pmuClass: "M", reportingRateHz: 30 } as const;
const P60 = { pmuClass: "P", reportingRateHz: 60 } as const;
const ONSET_US = 1_764_590_400e6 + 700_123;

const course = (clearAfterS: number): Course => ({
  onsetUs: ONSET_US,
  clearAfterS,
  poleDelaysS: [0, 0.003, 0.006],
  farEndDelayS: 0.003,
  fromUs: ONSET_US - 1.2e6,
  toUs: ONSET_US + 1.5e6,
  noise: 0.001,
  offsetS: 0.04,
});

function run(network: Network, ends: readonly (EndPhasorSet | undefined)[], c: Course): DisturbanceEvent[] {
  const tracker = new DisturbanceTracker(network);
  const events: DisturbanceEvent[] = [];
  for (const block of blocksOf(network, ends, c)) events.push(...tracker.step(block));
  return [...events, ...tracker.finish()];
}
const faultOf = (fault: Partial<TwoSource>) => solve(example(fault));
const settled = (events: readonly DisturbanceEvent[]) =>
  events.find((e): e is FaultLocated => e.kind === "located" && e.stage === "settled");

describe("a short fault on a line with both ends measured", () => {
  it.each([
    ["AG", 0.3, 5, 0.08, M60, M60],
    ["BC", 0.7, 5, 0.06, M60, M60],
    ["ABC", 0.5, 2, 0.05, M60, M60],
    ["BG", 0.15, 20, 0.1, M30, P60],
    ["CAG", 0.2, 1, 0.1, M30, P60],
  ] as const)("%s at %d of the line, %d ohm, %d s", (type, m, ohm, clearAfterS, unitA, unitB) => {
    const { a, b } = faultOf({ type, m, ohm });
    const events = run(plainNetwork([unitA, unitB]), [a, b], course(clearAfterS));
    expect(events[0]).toMatchObject({ kind: "noticed", lineIds: ["brack-tolva"] });
    expect(events.at(-1)?.kind).toBe("ended");
    const last = settled(events)!;
    expect(last.location.phases).toBe(type);
    // Known window and constants: what is left is the clearing's stagger and 0.1 % noise. 0.5 % of the line is twice what locating.md reports at the 90th percentile.
    expect(Math.abs(last.location.km! - m * 150)).toBeLessThan(0.75);
    expect(Math.abs(last.onsetUs - ONSET_US)).toBeLessThan(2_000);
    expect(Math.abs(last.clearedUs! - ONSET_US - clearAfterS * 1e6)).toBeLessThan(8_000);
    expect(events.find((e) => e.kind === "cleared")).toMatchObject({ noCurrentAt: ["brack", "tolva"] });
  });

  it("is told provisionally before the windows have passed the clearing", () => {
    const { a, b } = faultOf({ type: "AG", m: 0.3, ohm: 5 });
    const first = run(plainNetwork([M60, M60]), [a, b], course(0.08)).find((e): e is FaultLocated => e.kind === "located")!;
    expect(first.stage).toBe("provisional");
    expect(first.dataTimeUs).toBeLessThan(ONSET_US + 80_000);
    // Negative sequence of like units is right on a mixed frame too.
    expect(Math.abs(first.location.km! - 45)).toBeLessThan(1.5);
    expect(first.location.reasons).toContain("so far: more frames to come");
  });
});

describe("a short fault with one end measured", () => {
  it.each([
    ["AG", 0.3, 2, M60, 1.5],
    ["BC", 0.4, 2, M60, 1.5],
    ["AG", 0.3, 2, P60, 1],
  ] as const)("%s at %d, %d ohm", (type, m, ohm, unit, km) => {
    const { a } = faultOf({ type, m, ohm });
    const last = settled(run(plainNetwork([unit, undefined]), [a, undefined], course(0.08)))!;
    expect(last.location.phases).toBe(type);
    expect(Math.abs(last.location.km! - m * 150)).toBeLessThan(km);
    expect(last.location.flag).not.toBe("firm");
    expect(last.location.reasons).toContain("one end only (Brack)");
    const [low, high] = last.location.stretchKm!;
    expect(low).toBeLessThan(m * 150);
    expect(high).toBeGreaterThan(m * 150);
  });
});

describe("what is no fault on the line", () => {
  it("is told as lying behind the end that saw it backwards", () => {
    const { a } = faultOf({ type: "AG", m: 0.01, ohm: 1 });
    const { b } = faultOf({ type: "AG", m: 0.01, ohm: 1 });
    // A fault just behind Brack: the line carries only what Tolva sends through.
    const through = { pre: a.pre, fault: [...a.fault.slice(0, 3), ...b.fault.slice(3).map((x) => ({ re: -x.re, im: -x.im }))] };
    const events = run(plainNetwork([M60, M60]), [through, b], course(0.08));
    expect(events.some((e) => e.kind === "located" && e.stage !== "provisional")).toBe(false);
    expect(events.find((e) => e.kind === "outside")).toMatchObject({ reason: "behind Brack, seen from Brack-Tolva" });
  });

  it("is told as no fault when the load steps up without a voltage dip", () => {
    const { a, b } = faultOf({ type: "ABC", m: 0.5, ohm: 1e6 });
    const louder = (end: EndPhasorSet): EndPhasorSet => ({
      pre: end.pre,
      fault: end.pre.map((x, c) => (c < 3 ? x : { re: x.re * 1.3, im: x.im * 1.3 })),
    });
    const events = run(plainNetwork([M60, M60]), [louder(a), louder(b)], { ...course(Number.POSITIVE_INFINITY), offsetS: 0.001 });
    expect(events.some((e) => e.kind === "located")).toBe(false);
    expect(
      events.find((e) => e.kind === "outside")?.kind === "outside" && events.find((e) => e.kind === "outside"),
    ).toMatchObject({
      reason: "not a fault: balanced change without a voltage dip",
    });
  });

  it("is nothing at all on quiet frames with noise", () => {
    const { a, b } = faultOf({});
    const quiet = (end: EndPhasorSet): EndPhasorSet => ({ pre: end.pre, fault: end.pre });
    expect(run(plainNetwork([M60, P60]), [quiet(a), quiet(b)], { ...course(Number.POSITIVE_INFINITY), noise: 0.005 })).toEqual(
      [],
    );
  });
});

it("what stands on a line and no method allows for makes the place rough, with the reason", () => {
  const { a, b } = faultOf({ type: "AG", m: 0.3, ohm: 2 });
  const plain = plainNetwork([M60, M60]);
  const line = { ...plain.lines[0]!, seriesCapacitor: { atKm: 0, reactanceOhm: 20, voltageTransformer: "busSide" as const } };
  const last = settled(run({ ...plain, lines: [line] }, [a, b], course(0.08)))!;
  expect(last.location.flag).toBe("rough");
  expect(last.location.reasons).toContain("series capacitor on this line is not allowed for");
  const oneEnd = plainNetwork([M60, undefined]);
  const [near, far] = oneEnd.lines[0]!.terminals;
  const fed = { ...oneEnd.lines[0]!, terminals: [near!, { ...far!, source: "converter" as const }] };
  expect(settled(run({ ...oneEnd, lines: [fed] }, [a, undefined], course(0.08)))!.location.reasons).toContain(
    "converter at Tolva is taken for a usual source",
  );
});
