import { describe, expect, it } from "vitest";
import { addKernelUpTo, kernelOf, referenceWindow } from "../../pipeline/measuring-window.ts";

describe("reference windows", () => {
  it.each([
    ["P", 60, 60, 31],
    ["M", 60, 60, 165],
    ["M", 60, 30, 307],
    ["M", 50, 50, 143],
  ] as const)("of class %s at %i Hz and %i frames/s has %i symmetric taps that sum to one", (pmuClass, hz, rate, taps) => {
    const window = referenceWindow(pmuClass, hz, rate);
    expect(window.taps.length).toBe(taps);
    expect(window.taps.reduce((s, h) => s + h, 0)).toBeCloseTo(1, 12);
    window.taps.forEach((h, k) => {
      expect(h).toBeCloseTo(window.taps[taps - 1 - k]!, 14);
    });
    expect(window.halfS).toBeCloseTo(taps / (2 * 16 * hz), 12);
  });

  it("says when a rate is not in the table", () => {
    expect(referenceWindow("M", 60, 50).origin).toBe("M class reference, nearest rate 60 frames/s");
  });
});

describe("running sums", () => {
  const window = referenceWindow("M", 60, 60);
  const upTo = (u: number, growth: number, rad: number) => {
    const out = new Float64Array(2);
    addKernelUpTo(kernelOf(window, growth, rad), u, 1, out, 0);
    return out;
  };
  it("go from nothing through one half to all of a steady phasor", () => {
    expect([...upTo(-window.halfS - 1, 0, 0)]).toEqual([0, 0]);
    expect(upTo(0, 0, 0)[0]).toBeCloseTo(0.5, 12);
    expect(upTo(Number.POSITIVE_INFINITY, 0, 0)[0]).toBeCloseTo(1, 12);
  });
  it("suppress the image at twice nominal frequency", () => {
    const [re, im] = upTo(1, 0, -2 * Math.PI * 120);
    expect(Math.hypot(re!, im!)).toBeLessThan(0.002);
  });
});
