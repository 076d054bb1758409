import { describe, expect, it } from "vitest";
import { STRETCH_CHANCE, smallestPieces, towerSpan } from "../../pipeline/combine.ts";

const bell = (centre: number, sd: number, n = 200) =>
  Array.from({ length: n }, (_, i) => Math.exp(-0.5 * ((i + 0.5 - centre) / sd) ** 2));
const normalised = (x: number[]) => x.map((p) => p / x.reduce((s, q) => s + q, 0));
const towers = Array.from({ length: 101 }, (_, k) => ({ number: `${k + 1}`, km: k }));

describe("the 90 % stretch", () => {
  it("of one bell is one piece of 2 × 1.645 standard deviations", () => {
    const [piece, ...rest] = smallestPieces(normalised(bell(100, 10)), 0.5, towers);
    expect(rest).toEqual([]);
    expect(piece!.highKm - piece!.lowKm).toBeCloseTo(2 * 1.645 * 10 * 0.5, 0);
    expect(piece!.chance).toBeGreaterThanOrEqual(STRETCH_CHANCE);
    expect(piece!.towers).toEqual({ from: "42", to: "59" });
  });

  it("of two bells is two pieces, the likelier first, and leaves out the empty middle", () => {
    const pieces = smallestPieces(normalised(bell(40, 4).map((p, i) => p + 2 * bell(150, 4)[i]!)), 0.5, towers);
    expect(pieces.length).toBe(2);
    expect(pieces[0]!.lowKm).toBeGreaterThan(65);
    expect(pieces[1]!.highKm).toBeLessThan(30);
  });

  it("is never more than two pieces: the nearest are joined", () => {
    const three = normalised(bell(20, 3).map((p, i) => p + bell(40, 3)[i]! + bell(180, 3)[i]!));
    expect(smallestPieces(three, 0.5, []).length).toBe(2);
  });
});

it("names the towers that enclose a place, and none without a list", () => {
  expect(towerSpan(towers, 10.2, 10.2)).toEqual({ from: "11", to: "12" });
  expect(towerSpan(towers, 10, 10)).toEqual({ from: "11", to: "12" });
  expect(towerSpan([], 10, 10)).toBeUndefined();
});
