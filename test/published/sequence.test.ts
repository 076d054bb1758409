/**
 * Symmetrical components. Source: Grainger & Stevenson, Power System Analysis (1994), example 11.1 (from memory): one conductor of a three-phase line is
 * open, line currents 10∠0°, 10∠180°, 0 A give Ia0 = 0, Ia1 = 5.78∠−30°, Ia2 = 5.78∠30° A.
 */
import { expect, it } from "vitest";
import { abs, arg, complex, polar } from "../../pipeline/complex.ts";
import { sequenceInto, toPhases, toSequence } from "../../pipeline/sequence.ts";

const abc = [polar(10, 0), polar(10, Math.PI), complex(0)] as const;

it("splits the open-conductor example into the book's components", () => {
  const { zero, positive, negative } = toSequence(abc);
  expect(abs(zero)).toBeCloseTo(0, 9);
  expect(abs(positive)).toBeCloseTo(5.78, 1);
  expect((arg(positive) * 180) / Math.PI).toBeCloseTo(-30, 6);
  expect(abs(negative)).toBeCloseTo(5.78, 1);
  expect((arg(negative) * 180) / Math.PI).toBeCloseTo(30, 6);
});

it("comes back to the phases", () => {
  toPhases(toSequence(abc)).forEach((x, k) => {
    expect(x.re).toBeCloseTo(abc[k]!.re, 9);
    expect(x.im).toBeCloseTo(abc[k]!.im, 9);
  });
});

it("is the same on typed arrays", () => {
  const out = new Float64Array(6);
  const row = Float64Array.from([3, -1, ...[polar(4, -2), polar(5, 2)].flatMap((x) => [x.re, x.im])]);
  sequenceInto(row, 0, out, 0);
  const { zero, positive, negative } = toSequence([complex(3, -1), polar(4, -2), polar(5, 2)]);
  [zero, positive, negative].forEach((x, k) => {
    expect(out[2 * k]).toBeCloseTo(x.re, 12);
    expect(out[2 * k + 1]).toBeCloseTo(x.im, 12);
  });
});
