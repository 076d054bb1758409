/**
 * The simulator's time-domain solution against a phasor solution by nodal matrices written for this test alone: the line as exact equivalent-pi sections from
 * the hyperbolic equations. Source: Grainger & Stevenson, Power System Analysis, ch. 6 (long line) and 8 (nodal equations), from memory.
 */
import { describe, expect, it } from "vitest";
import { demoNetworkPath, loadNetwork } from "../../config/index.ts";
import { type Episode, runEpisode, SAMPLES_PER_CYCLE } from "../../simulator/line-model.ts";
import { measureInto } from "../../simulator/measuring-unit.ts";
import { sourcesOf } from "../../simulator/sources.ts";

type C = readonly [number, number];
const add = (a: C, b: C): C => [a[0] + b[0], a[1] + b[1]];
const sub = (a: C, b: C): C => [a[0] - b[0], a[1] - b[1]];
const mul = (a: C, b: C): C => [a[0] * b[0] - a[1] * b[1], a[0] * b[1] + a[1] * b[0]];
const inv = (a: C): C => [a[0] / (a[0] ** 2 + a[1] ** 2), -a[1] / (a[0] ** 2 + a[1] ** 2)];
const abs = (a: C) => Math.hypot(a[0], a[1]);
const root = (a: C): C => {
  const [r, p] = [Math.sqrt(abs(a)), Math.atan2(a[1], a[0]) / 2];
  return [r * Math.cos(p), r * Math.sin(p)];
};
const sinh = (a: C): C => [Math.sinh(a[0]) * Math.cos(a[1]), Math.cosh(a[0]) * Math.sin(a[1])];
const cosh = (a: C): C => [Math.cosh(a[0]) * Math.cos(a[1]), Math.sinh(a[0]) * Math.sin(a[1])];

/** Gaussian elimination with pivots. */
function solve(a: C[][], b: C[]): C[] {
  const n = b.length;
  for (let k = 0; k < n; k++) {
    const pivot = [...a.keys()].slice(k).reduce((p, i) => (abs(a[i]![k]!) > abs(a[p]![k]!) ? i : p), k);
    [a[k], a[pivot], b[k], b[pivot]] = [a[pivot]!, a[k]!, b[pivot]!, b[k]!];
    for (let i = k + 1; i < n; i++) {
      const f = mul(a[i]![k]!, inv(a[k]![k]!));
      for (let j = k; j < n; j++) a[i]![j] = sub(a[i]![j]!, mul(f, a[k]![j]!));
      b[i] = sub(b[i]!, mul(f, b[k]!));
    }
  }
  const x = new Array<C>(n);
  for (let k = n - 1; k >= 0; k--) {
    let s = b[k]!;
    for (let j = k + 1; j < n; j++) s = sub(s, mul(a[k]![j]!, x[j]!));
    x[k] = mul(s, inv(a[k]![k]!));
  }
  return x;
}

const network = loadNetwork(demoNetworkPath());
const line = network.lines[0]!;
const sources = sourcesOf(line);
const ground: C = [0, 0];

/** Arms between the faulted phases and the point that they meet in [ohm], as the simulator documents them. */
const ARM_OHM = 0.05;
/** Nodal conductance of a fault, from the voltages it imposes rather than by reduction of a star: u = Z i between faulted phases, inverted by hand. */
function faultMatrix(type: string, ohm: number): number[][] {
  const g = [0, 1, 2].map(() => [0, 0, 0]);
  const [a, b] = [..."ABC"].flatMap((p, k) => (type.includes(p) ? [k] : [])) as [number, number];
  if (type === "ABC") {
    // Three equal resistances to a floating middle, whose voltage is the phases' mean.
    for (let i = 0; i < 3; i++) for (let j = 0; j < 3; j++) g[i]![j] = (i === j ? 2 / 3 : -1 / 3) / ohm;
  } else if (b === undefined) {
    g[a]![a] = 1 / ohm;
  } else if (!type.includes("G")) {
    g[a]![a] = g[b]![b] = 1 / ohm;
    g[a]![b] = g[b]![a] = -1 / ohm;
  } else {
    // Each phase drops its own arm's current and both currents through `ohm`: Z = [[arm + ohm, ohm], [ohm, arm + ohm]].
    const det = ARM_OHM * (ARM_OHM + 2 * ohm);
    g[a]![a] = g[b]![b] = (ARM_OHM + ohm) / det;
    g[a]![b] = g[b]![a] = -ohm / det;
  }
  return g;
}

/** rms phasors [end][VA VB VC IA IB IC] with a fault of conductance `g` at fraction `m`; undefined: none. */
function phasors(m: number, g: number[][] | undefined): C[][] {
  const { z1, z0, b1, b0 } = line.constants;
  const y = Array.from({ length: 9 }, () => Array.from({ length: 9 }, (): C => ground));
  const rhs = Array.from({ length: 9 }, (): C => ground);
  const phase = (zero: C, positive: C) =>
    [0, 1, 2].map((a) =>
      [0, 1, 2].map((b): C => mul(a === b ? add(zero, mul([2, 0], positive)) : sub(zero, positive), [1 / 3, 0])),
    );
  const stamp = (at: number, to: number, m3: C[][], sign: number) => {
    for (let a = 0; a < 3; a++)
      for (let b = 0; b < 3; b++) y[at + a]![to + b] = add(y[at + a]![to + b]!, mul(m3[a]![b]!, [sign, 0]));
  };
  const pi = (share: number) => {
    const of = (z: C, b: number) => {
      const yy: C = [0, b];
      const [gamma, zc] = [mul(root(mul(z, yy)), [share, 0]), root(mul(z, inv(yy)))];
      const half = mul(gamma, [0.5, 0]);
      return { series: inv(mul(zc, sinh(gamma))), shunt: mul(mul(sinh(half), inv(cosh(half))), inv(zc)) };
    };
    const [p, z] = [of([z1.re, z1.im], b1), of([z0.re, z0.im], b0)];
    return { series: phase(z.series, p.series), shunt: phase(z.shunt, p.shunt) };
  };
  const sections = [pi(m), pi(1 - m)];
  sections.forEach(({ series, shunt }, k) => {
    const [p, q] = [3 * k, 3 * k + 3];
    for (const [at, to, sign] of [
      [p, p, 1],
      [q, q, 1],
      [p, q, -1],
      [q, p, -1],
    ] as const)
      stamp(at, to, series, sign);
    stamp(p, p, shunt, 1);
    stamp(q, q, shunt, 1);
  });
  sources.forEach((source, e) => {
    const ys = phase(inv([...source.z0]), inv([...source.z1]));
    const at = 6 * e;
    stamp(at, at, ys, 1);
    const size = (line.nominalKv * 1e3 * source.voltagePerUnit) / Math.sqrt(3);
    const emf = [0, -120, 120].map((shift): C => {
      const angle = ((source.angleDeg + shift) * Math.PI) / 180;
      return [size * Math.cos(angle), size * Math.sin(angle)];
    });
    for (let a = 0; a < 3; a++) for (let b = 0; b < 3; b++) rhs[at + a] = add(rhs[at + a]!, mul(ys[a]![b]!, emf[b]!));
  });
  if (g)
    stamp(
      3,
      3,
      g.map((row) => row.map((x): C => [x, 0])),
      1,
    );
  const v = solve(y, rhs);
  return [0, 1].map((e) => {
    const at = 6 * e;
    const { series, shunt } = sections[e]!;
    const here = v.slice(at, at + 3);
    const there = v.slice(3, 6);
    const i = [0, 1, 2].map((a) =>
      [0, 1, 2].reduce(
        (s: C, b) => add(s, add(mul(series[a]![b]!, sub(here[b]!, there[b]!)), mul(shunt[a]![b]!, here[b]!))),
        ground,
      ),
    );
    return [...here, ...i];
  });
}

const never = [Number.POSITIVE_INFINITY, Number.POSITIVE_INFINITY] as const;
const episode = (over: Partial<Episode>): Episode => ({
  line,
  fault: undefined,
  startsClosed: true,
  onsetS: 0.05,
  openS: never,
  closeS: never,
  durationS: 0.6,
  ...over,
});
/** Two-cycle Fourier sum around sample `centre`. */
function measured(wave: Float64Array, centre: number): C {
  const filter = new Float64Array(2 * SAMPLES_PER_CYCLE + 1).fill(1 / (2 * SAMPLES_PER_CYCLE));
  filter[0] = filter[2 * SAMPLES_PER_CYCLE] = 1 / (4 * SAMPLES_PER_CYCLE);
  const out = new Float64Array(2);
  measureInto(filter, (k) => wave[k]!, centre, out, 0);
  return [out[0]!, out[1]!];
}

describe("steady states of the time-domain solution", () => {
  it("before a fault: every phasor within 0.2 % of the matrix solution", () => {
    const { ends } = runEpisode(episode({ durationS: 0.1 }), sources, 60, 0);
    const expected = phasors(0.5, undefined);
    ends.forEach((end, e) => {
      end.channels.forEach((wave, c) => {
        expect(abs(sub(measured(wave, 48), expected[e]![c]!)) / abs(expected[e]![c]!), `end ${e}, channel ${c}`).toBeLessThan(
          0.002,
        );
      });
    });
  });

  for (const type of ["AG", "BC", "BCG", "CAG", "ABC"]) {
    it.each([0.2, 0.7])(`${type} at %d of the line: within 0.2 % of the largest voltage and current`, (m) => {
      const fault = { type, km: m * line.lengthKm, ohm: 5 };
      const { ends } = runEpisode(episode({ fault }), sources, 60, 0);
      const expected = phasors(m, faultMatrix(type, 5));
      ends.forEach((end, e) => {
        for (const first of [0, 3]) {
          const largest = Math.max(...[0, 1, 2].map((k) => abs(expected[e]![first + k]!)));
          for (let c = first; c < first + 3; c++)
            expect(abs(sub(measured(end.channels[c]!, 540), expected[e]![c]!)) / largest, `end ${e}, channel ${c}`).toBeLessThan(
              0.002,
            );
        }
      });
    });
  }
});

describe("transients of the time-domain solution", () => {
  it("the offset of a three-phase fault at the line's end dies with L/R of source and fault", () => {
    const { ends } = runEpisode(episode({ fault: { type: "ABC", km: 0, ohm: 0 }, onsetS: 0.05 }), sources, 60, 0);
    const expected = phasors(1e-9, faultMatrix("ABC", ARM_OHM));
    const w = 2 * Math.PI * 60;
    // What is left of phase currents when the steady fault current is taken away; the arms' 0.05 ohm belong to the loop.
    const offsets = [3, 4, 5].map((c) => {
      const [re, im] = expected[0]![c]!;
      return (n: number) => ends[0].channels[c]![n]! - Math.SQRT2 * (re * Math.cos((w * n) / 960) - im * Math.sin((w * n) / 960));
    });
    const mean = (f: (n: number) => number, n: number) =>
      Array.from({ length: 16 }, (_, k) => f(n + k)).reduce((s, x) => s + x, 0) / 16;
    const largest = offsets.reduce((a, b) => (Math.abs(mean(b, 64)) > Math.abs(mean(a, 64)) ? b : a));
    const tau = 0.05 / Math.log(mean(largest, 64) / mean(largest, 64 + 48));
    const [r, x] = sources[0].z1;
    expect(Math.abs(tau / (x / w / (r + ARM_OHM)) - 1)).toBeLessThan(0.05);
  });

  for (const [type, km] of [
    ["AG", 60],
    ["BC", 20],
    ["CAG", 5],
    ["ABC", 110],
  ] as const) {
    it.each([0, 1] as const)(`${type}: the first pole to open, at end %d alone, finds less than a tenth of its peak`, (e) => {
      const openS: readonly [number, number] = e === 0 ? [0.12, Number.POSITIVE_INFINITY] : [Number.POSITIVE_INFINITY, 0.12];
      const { ends, opened } = runEpisode(episode({ fault: { type, km, ohm: 3 }, openS, durationS: 0.2 }), sources, 60, 0);
      const t = Math.min(...opened[e]);
      const wave = ends[e].channels[3 + opened[e].indexOf(t)]!;
      // A sample averages half a sample to either side. The last one wholly before the opening and its two predecessors, continued by a parabola.
      const n = Math.floor(t * 960 - 0.5);
      const ahead = t * 960 - n;
      const slope = wave[n]! - wave[n - 1]!;
      const bend = slope - (wave[n - 1]! - wave[n - 2]!);
      const current = wave[n]! + ahead * slope + ((ahead * (ahead + 1)) / 2) * bend;
      const peak = wave.slice(60, 110).reduce((m, x) => Math.max(m, Math.abs(x)), 0);
      expect(peak).toBeGreaterThan(100);
      // One step of the solution is 2.8 degrees: 0.05 of the peak.
      expect(Math.abs(current) / peak).toBeLessThan(0.1);
      expect(opened[1 - e]!.every((x) => x === Number.POSITIVE_INFINITY)).toBe(true);
    });
  }

  it("each pole opens at a zero of its own current, and stays open", () => {
    const { ends, opened } = runEpisode(
      episode({ fault: { type: "AG", km: 60, ohm: 3 }, openS: [0.12, 0.124], durationS: 0.3 }),
      sources,
      60,
      0,
    );
    opened.forEach((poles, e) => {
      poles.forEach((t, k) => {
        // Told at 0.12 s (0.124 s); the next zero comes within half a cycle, with a decaying offset within one.
        expect(t).toBeGreaterThanOrEqual(e === 0 ? 0.12 : 0.124);
        expect(t).toBeLessThan(0.124 + 1 / 60);
        const wave = ends[e]!.channels[3 + k]!;
        const peak = wave.slice(60, 110).reduce((m, x) => Math.max(m, Math.abs(x)), 0);
        // The sample before lies up to 1/16 cycle earlier: sin(22.5 degrees) = 0.38 of the peak, more where the line rings after another pole opened. A
        // coarse bound, for every pole; the test above looks closer, where nothing rings.
        expect(Math.abs(wave[Math.floor(t * 960)]!)).toBeLessThan(0.5 * peak);
        for (let n = Math.ceil(t * 960) + 2; n < wave.length - 1; n++) expect(Math.abs(wave[n]!)).toBeLessThan(0.01);
      });
    });
  });
});
