import { describe, expect, it } from "vitest";
import type { Combined } from "../../pipeline/combine.ts";
import { type FlagInputs, flagOf } from "../../pipeline/flag.ts";

const combined = (widthKm: number, over: Partial<Combined> = {}): Combined => ({
  km: 40,
  sdKm: widthKm / 3.3,
  pieces: [{ lowKm: 40 - widthKm / 2, highKm: 40 + widthKm / 2, chance: 0.9 }],
  density: { stepKm: 0.1, perKm: [] },
  estimates: [],
  isQuarrel: false,
  spreadKm: 0.3,
  ...over,
});
const flag = (over: Partial<FlagInputs> = {}) =>
  flagOf({
    combined: combined(1),
    lengthKm: 100,
    stage: "settled",
    measuredAt: ["Brack", "Tolva"],
    unmeasured: [],
    residual: 0.002,
    frames: "unmixed",
    phaseMarginDegrees: 25,
    missingFrames: 0,
    unsynchronisedAt: [],
    isStillOn: false,
    unmodelled: [],
    ...over,
  });

describe("the flag", () => {
  it.each([
    [1.99, "firm"],
    [2.01, "fair"],
    [7.99, "fair"],
    [8.01, "rough"],
  ] as const)("of two ends that agree, by the stretch: %d %% of the line is %s", (width, expected) => {
    expect(flag({ combined: combined(width) }).flag).toBe(expected);
  });
  it("of one end is never firm, and says whose source is assumed", () => {
    const one = flag({ measuredAt: ["Brack"], unmeasured: ["Tolva"] });
    expect(one.flag).toBe("fair");
    expect(one.reasons.slice(0, 2)).toEqual(["one end only (Brack)", "source behind Tolva assumed"]);
  });
  it("is rough when answers quarrel or spread, and never calls that agreement", () => {
    const quarrel = flag({ combined: combined(1, { isQuarrel: true, spreadKm: 9 }) });
    const spread = flag({ combined: combined(1, { spreadKm: 4.1 }) });
    expect([quarrel.flag, spread.flag]).toEqual(["rough", "rough"]);
    expect(quarrel.reasons[0]).toBe("methods disagree by up to 9.0 km: each place is shown");
    expect(spread.reasons[0]).toBe("answers spread over 4.1 km");
    expect(flag({ combined: combined(1, { spreadKm: 3.9 }) }).reasons[0]).toBe("both ends agree within 3.9 km");
  });
  it.each([
    [{ residual: 0.021 }, /poor fit, 2.1 % unexplained/],
    [{ unsynchronisedAt: ["Tolva"] }, /clock at Tolva not synchronised/],
    [{ phaseMarginDegrees: 7 }, /phases close to call/],
    [{ unmodelled: ["series capacitor on this line is not allowed for"] }, /series capacitor/],
  ])("is rough with its reason: %j", (over, reason) => {
    const { flag: got, reasons } = flag(over);
    expect(got).toBe("rough");
    expect(reasons.join("; ")).toMatch(reason);
  });
  it("says what is still to come, and what is missing", () => {
    expect(flag({ stage: "provisional" }).reasons).toContain("so far: more frames to come");
    expect(flag({ isStillOn: true }).reasons).toContain("fault current still flows");
    expect(flag({ missingFrames: 1 }).reasons).toContain("1 frame missing");
  });
});
