/**
 * One density along the line from all methods. Methods share phasors, transformers and line constants, so their errors are correlated: weights
 * are those of the best linear unbiased combination under the covariance of the draws, and no method counts against the truth (weights below
 * zero are dropped). Answers that differ by more than their common spread allows are not averaged: the density then has a part for each.
 */
import type { Line, Tower } from "../config/index.ts";
import type { Evidence } from "./evidence.ts";
import { reduce, solveReduced } from "./least-squares.ts";
import type { Estimate, Piece, TowerSpan } from "./types.ts";

/** Level of the stretch. */
export const STRETCH_CHANCE = 0.9;
const STEPS = 1000;
/** Squared distance over its variance at which two answers quarrel: under 1 in 1,000 for normal errors (χ², one degree of freedom). */
const QUARREL = 10.8;

export interface Combined {
  readonly km: number;
  readonly sdKm: number;
  readonly pieces: readonly Piece[];
  readonly density: { readonly stepKm: number; readonly perKm: readonly number[] };
  readonly estimates: readonly Estimate[];
  readonly isQuarrel: boolean;
  /** Largest distance between answers that count [km]. */
  readonly spreadKm: number;
}

/**
 * @param extraSdOf  standard deviation to add to an answer from these ends beyond what the draws hold, fraction of the line: what the model cannot know
 * @returns undefined when no method gave a usable answer
 */
export function combine(
  line: Line,
  evidence: Evidence,
  extraSdOf: (ends: readonly number[]) => number,
  framesOf: (ends: readonly number[]) => string,
  stationsOf: (ends: readonly number[]) => string[],
): Combined | undefined {
  const { answers, draws } = evidence;
  const valid = (k: number) => {
    const finite = draws.filter((d) => Number.isFinite(d[k]!)).length;
    return Number.isFinite(answers[k]!.m) && finite > 0.8 * draws.length;
  };
  const shown = answers.map((_, k) => k).filter(valid);
  const used = shown.filter((k) => !answers[k]!.isOnlyShown);
  if (used.length === 0) return undefined;
  const whole = draws.filter((d) => used.every((k) => Number.isFinite(d[k]!)));
  const extra = used.map((k) => extraSdOf(answers[k]!.ends));
  const covariance = covarianceOf(whole, used, extra);
  const weights = bestWeights(covariance);
  const n = used.length;
  const m = (i: number) => answers[used[i]!]!.m;
  let isQuarrel = false;
  let spread = 0;
  for (let i = 0; i < n; i++) {
    for (let j = i + 1; j < n; j++) {
      const variance = covariance[i]![i]! + covariance[j]![j]! - 2 * covariance[i]![j]!;
      const apart = Math.abs(m(i) - m(j));
      if (weights[i]! > 0 && weights[j]! > 0) spread = Math.max(spread, apart);
      if (apart ** 2 > QUARREL * Math.max(variance, extra[i]! ** 2, extra[j]! ** 2)) isQuarrel = true;
    }
  }
  const parts = isQuarrel
    ? quarrelParts(
        used.map((_, i) => ({
          at: m(i),
          sd: Math.sqrt(covariance[i]![i]!),
          extraSd: extra[i]!,
          spread: whole.map((d) => d[used[i]!]!),
        })),
      )
    : [
        {
          share: 1,
          extraSd: Math.sqrt(weights.reduce((s, w, i) => s + (w * extra[i]!) ** 2, 0)),
          at: weights.reduce((s, w, i) => s + w * m(i), 0),
          spread: whole.map((d) => weights.reduce((s, w, i) => s + w * d[used[i]!]!, 0)),
        },
      ];
  const perStep = densityOf(parts);
  const stepKm = line.lengthKm / STEPS;
  const pieces = smallestPieces(perStep, stepKm, line.towers);
  const mode = isQuarrel ? (perStep.indexOf(Math.max(...perStep)) + 0.5) / STEPS : Math.min(1, Math.max(0, parts[0]!.at));
  const mean = perStep.reduce((s, p, i) => s + (p * (i + 0.5)) / STEPS, 0);
  const sd = Math.sqrt(perStep.reduce((s, p, i) => s + p * ((i + 0.5) / STEPS - mean) ** 2, 0));
  return {
    km: mode * line.lengthKm,
    sdKm: sd * line.lengthKm,
    pieces,
    density: { stepKm, perKm: perStep.map((p) => Number((p / stepKm).toPrecision(3))).map((p) => (p < 1e-6 ? 0 : p)) },
    estimates: shown.map((k) => {
      const answer = answers[k]!;
      const i = used.indexOf(k);
      const own = draws.map((d) => d[k]!).filter(Number.isFinite);
      return {
        method: answer.method,
        terminals: stationsOf(answer.ends),
        km: answer.m * line.lengthKm,
        sdKm: Math.hypot(deviation(own), extraSdOf(answer.ends)) * line.lengthKm,
        weight: i < 0 ? 0 : weights[i]!,
        witness: answer.witness,
        frames: framesOf(answer.ends),
        ...(answer.resistanceOhm === undefined ? {} : { resistanceOhm: answer.resistanceOhm }),
      };
    }),
    isQuarrel,
    spreadKm: spread * line.lengthKm,
  };
}

const meanOf = (x: readonly number[]) => x.reduce((s, v) => s + v, 0) / x.length;
function deviation(x: readonly number[]): number {
  const mean = meanOf(x);
  return Math.sqrt(x.reduce((s, v) => s + (v - mean) ** 2, 0) / Math.max(1, x.length - 1));
}

function covarianceOf(draws: readonly Float64Array[], used: readonly number[], extra: readonly number[]): number[][] {
  const means = used.map((k) => meanOf(draws.map((d) => d[k]!)));
  return used.map((k, i) =>
    used.map((l, j) => {
      const shared = draws.reduce((s, d) => s + (d[k]! - means[i]!) * (d[l]! - means[j]!), 0) / Math.max(1, draws.length - 1);
      return shared + (i === j ? extra[i]! ** 2 : 0);
    }),
  );
}

/** Weights Σ⁻¹1/(1ᵀΣ⁻¹1), dropping the most negative until none is. */
function bestWeights(covariance: readonly (readonly number[])[]): number[] {
  let kept = covariance.map((_, i) => i);
  for (;;) {
    const n = kept.length;
    const a = Float64Array.from(kept.flatMap((i) => kept.map((j) => covariance[i]![j]!)));
    const b = new Float64Array(n).fill(1);
    const size = Math.max(...a);
    for (let k = 0; k < a.length; k++) a[k] = a[k]! / size;
    reduce(a, b, n, n, 1);
    const raw = solveReduced(a, b, n, n, 1).solution;
    const sum = raw.reduce((s, w) => s + w, 0);
    const worst = raw.reduce((w, x, k) => (x / sum < raw[w]! / sum ? k : w), 0);
    if (raw[worst]! / sum >= 0 || n === 1) {
      const weights = new Array<number>(covariance.length).fill(0);
      kept.forEach((i, k) => {
        weights[i] = n === 1 ? 1 : raw[k]! / sum;
      });
      return weights;
    }
    kept = kept.filter((_, k) => k !== worst);
  }
}

interface Part {
  readonly share: number;
  readonly extraSd: number;
  readonly at: number;
  readonly spread: readonly number[];
}

/** Each answer for itself, by its precision, none below a tenth: a sure method can be wrong too. */
function quarrelParts(each: readonly { at: number; sd: number; extraSd: number; spread: readonly number[] }[]): Part[] {
  const precision = each.map((e) => 1 / e.sd ** 2);
  const total = precision.reduce((s, p) => s + p, 0);
  const raw = precision.map((p) => Math.max(p / total, 0.1));
  const sum = raw.reduce((s, p) => s + p, 0);
  return each.map((e, i) => ({ share: raw[i]! / sum, at: e.at, extraSd: e.extraSd, spread: e.spread }));
}

/** Chance in each step of the line: a kernel estimate of every part (Silverman's rule), centred on its answer, cut to the line, summing to one. */
function densityOf(parts: readonly Part[]): number[] {
  const out = new Array<number>(STEPS).fill(0);
  for (const { share, at, spread, extraSd } of parts) {
    const centre = meanOf(spread);
    const width = Math.max(Math.hypot(1.06 * deviation(spread) * spread.length ** -0.2, extraSd), 0.5 / STEPS);
    for (const x of spread) {
      const middle = at + x - centre;
      const first = Math.max(0, Math.floor((middle - 5 * width) * STEPS));
      const last = Math.min(STEPS - 1, Math.ceil((middle + 5 * width) * STEPS));
      for (let s = first; s <= last; s++)
        out[s] = out[s]! + (share * Math.exp(-0.5 * (((s + 0.5) / STEPS - middle) / width) ** 2)) / width;
    }
  }
  const total = out.reduce((s, p) => s + p, 0);
  if (total > 0) return out.map((p) => p / total);
  // All of it lies beyond an end: the end itself is the nearest place on the line.
  out[parts[0]!.at < 0.5 ? 0 : STEPS - 1] = 1;
  return out;
}

/** The smallest part of the line that holds the stretch's chance, in one or two pieces, likelier first. */
export function smallestPieces(perStep: readonly number[], stepKm: number, towers: readonly Tower[]): Piece[] {
  const order = perStep.map((_, i) => i).sort((i, j) => perStep[j]! - perStep[i]!);
  const isIn = new Array<boolean>(perStep.length).fill(false);
  let held = 0;
  for (const i of order) {
    if (held >= STRETCH_CHANCE) break;
    isIn[i] = true;
    held += perStep[i]!;
  }
  let runs: { first: number; last: number }[] = [];
  isIn.forEach((inside, i) => {
    if (!inside) return;
    if (i > 0 && isIn[i - 1]) runs.at(-1)!.last = i;
    else runs.push({ first: i, last: i });
  });
  while (runs.length > 2) {
    const gaps = runs.slice(1).map((run, k) => run.first - runs[k]!.last);
    const narrowest = gaps.indexOf(Math.min(...gaps));
    const [left, right] = [runs[narrowest]!, runs[narrowest + 1]!];
    runs = [...runs.slice(0, narrowest), { first: left.first, last: right.last }, ...runs.slice(narrowest + 2)];
  }
  return runs
    .map(({ first, last }) => {
      const lowKm = first * stepKm;
      const highKm = (last + 1) * stepKm;
      const towersOf = towerSpan(towers, lowKm, highKm);
      const chance = perStep.slice(first, last + 1).reduce((s, p) => s + p, 0);
      return { lowKm, highKm, chance, ...(towersOf ? { towers: towersOf } : {}) };
    })
    .sort((p, q) => q.chance - p.chance);
}

/** The towers that enclose a part of the line; undefined without a tower list. */
export function towerSpan(towers: readonly Tower[], lowKm: number, highKm: number): TowerSpan | undefined {
  if (towers.length < 2) return undefined;
  let from = towers[0]!;
  for (const tower of towers) if (tower.km <= lowKm) from = tower;
  const to = towers.find((tower) => tower.km >= highKm && tower.km > from.km) ?? towers.at(-1)!;
  return { from: from.number, to: to.number };
}
