/**
 * A seeded campaign of faults on one line between two sources, for accuracy statistics: every fault is solved once in the time domain, then measured by every
 * kind of unit that is compared. The locator gets line constants with an error of their own.
 */
import { type Line, type Network, type PmuClass, parseNetwork, type Terminal } from "../../config/index.ts";
import type { FrameBlock } from "../../ingest/types.ts";
import { LineCourse, MeasuredEnd } from "../../simulator/course.ts";
import type { Fault, Source } from "../../simulator/line-model.ts";
import { randomFrom } from "../../simulator/random.ts";
import { plainRing } from "../pipeline/frames.ts";

const START_US = 1_772_590_440e6;

export interface CampaignOptions {
  readonly cases: number;
  readonly seed: number;
  /** Relative standard deviation of a frame's noise. */
  readonly noise: number;
  /** 1: instrument errors anywhere within class 0.5. */
  readonly instrumentErrors: number;
  /** Each of R1, X1, R0, X0 that the locator believes is off by up to this share, evenly spread. */
  readonly constantError: number;
}

export interface CampaignCase {
  readonly fault: Fault;
  readonly onsetUs: number;
  readonly durationS: number;
  readonly course: LineCourse;
  readonly seed: number;
  /** What the locator believes of the line. */
  readonly believed: Line["constants"];
}

export interface UnitKind {
  readonly pmuClass: PmuClass;
  readonly reportingRateHz: number;
}

const base = parseNetwork(
  `
name: campaign
frequencyHz: 60
stations: [{ id: brack, name: Brack }, { id: tolva, name: Tolva }]
feeds:
  - { id: a, address: "tcp://127.0.0.1:1", idCode: 1, class: M, reportingRateHz: 60 }
  - { id: b, address: "tcp://127.0.0.1:2", idCode: 2, class: M, reportingRateHz: 60 }
lines:
  - id: brack-tolva
    nominalKv: 230
    lengthKm: 148.2
    perKm: { r1Ohm: 0.062, x1Ohm: 0.486, r0Ohm: 0.312, x0Ohm: 1.345, b1MicroSiemens: 3.42, b0MicroSiemens: 2.05 }
    uncertaintyPercent: { z1: 1, z0: 1 }
    terminals: [{ station: brack, feed: a }, { station: tolva, feed: b }]
    towers: { spanKm: 0.35 }
`,
  "campaign",
);

/** The network with these units; undefined leaves an end unmeasured. */
function networkWith(units: readonly (UnitKind | undefined)[], constants?: Line["constants"]): Network {
  const line = base.lines[0]!;
  const terminals = line.terminals.map((t, k): Terminal => {
    if (units[k]) return t;
    const { measured: _, ...unmeasured } = t;
    return unmeasured;
  });
  const feeds = base.feeds.flatMap((f, k) => (units[k] ? [{ ...f, ...units[k] }] : []));
  return { ...base, feeds, lines: [{ ...line, terminals, constants: constants ?? line.constants }] };
}

const TYPES = ["AG", "AG", "BG", "CG", "BG", "AB", "BC", "CA", "ABG", "BCG", "CAG", "ABC"];
const RESISTANCES = [0, 0.5, 1, 2, 5, 5, 10, 20, 30, 50];

/** One of the campaign's faults; the same number and seed give the same fault. */
export function campaignCase(n: number, options: CampaignOptions): CampaignCase {
  const random = randomFrom(options.seed * 100_003 + n);
  const pick = <T>(list: readonly T[]): T => list[Math.floor(random.uniform() * list.length)]!;
  const between = (low: number, high: number) => low + (high - low) * random.uniform();
  const line = networkWith([undefined, undefined]).lines[0]!;
  const source = (angleDeg: number): Source => {
    const x = line.nominalKv ** 2 / (between(2, 8) * 1e3);
    const zero = between(0.8, 1.4);
    const r = x / between(8, 20);
    return { z1: [r, x], z0: [r * zero * 1.3, x * zero], angleDeg, voltagePerUnit: between(0.99, 1.04) };
  };
  const angle = between(5, 20) * (random.uniform() < 0.5 ? -1 : 1);
  const course = new LineCourse(line, 60, [source(angle), source(0)]);
  const type = pick(TYPES);
  const isBetweenPhases = !type.includes("G");
  const fault: Fault = {
    type,
    km: between(0.03, 0.97) * line.lengthKm,
    ohm: isBetweenPhases ? pick(RESISTANCES) / 4 : pick(RESISTANCES),
  };
  const onsetUs = START_US + Math.round(between(2e6, 2e6 + 1e6 / 60));
  const durationS = between(0.05, 0.12);
  const gap = between(0, 0.012);
  const opens: [number, number] = random.uniform() < 0.5 ? [durationS - gap, durationS] : [durationS, durationS - gap];
  const never = [Number.POSITIVE_INFINITY, Number.POSITIVE_INFINITY] as const;
  course.plan(onsetUs, fault, [Math.max(0.03, opens[0] - 0.008), Math.max(0.03, opens[1] - 0.008)], never);
  const off = () => 1 + options.constantError * between(-1, 1);
  const { z1, z0, ...rest } = line.constants;
  const believed = {
    ...rest,
    z1: { re: z1.re * off(), im: z1.im * off() },
    z0: { re: z0.re * off(), im: z0.im * off() },
    z1Percent: (100 * options.constantError) / Math.sqrt(3) || 0.01,
    z0Percent: (100 * options.constantError) / Math.sqrt(3) || 0.01,
  };
  return { fault, onsetUs, durationS, course, seed: Math.floor(random.uniform() * 1e9), believed };
}

/** The case's frames as these units send them, one a block, in time order, and the locator's network. */
export function framesOf(
  c: CampaignCase,
  units: readonly (UnitKind | undefined)[],
  options: CampaignOptions,
): { network: Network; blocks: Iterable<FrameBlock> } {
  const network = networkWith(units, c.believed);
  const simulated = networkWith(units);
  const tracks = network.lines[0]!.terminals.flatMap((terminal) => {
    if (!terminal.measured) return [];
    const end = new MeasuredEnd(simulated, c.course, terminal, { ...options, seed: c.seed + terminal.index });
    const feed = network.feeds.find((f) => f.id === end.feedId)!;
    return [
      {
        end,
        ring: plainRing(feed.id, feed.idCode, feed.reportingRateHz, 60),
        slot: Math.ceil((c.onsetUs - 1.3e6) / end.periodUs),
      },
    ];
  });
  function* blocks(): Generator<FrameBlock> {
    for (;;) {
      const next = tracks.reduce((a, b) => (b.slot * b.end.periodUs < a.slot * a.end.periodUs ? b : a));
      const timeUs = Math.round(next.slot * next.end.periodUs);
      if (timeUs > c.onsetUs + 1.0e6) return;
      const { phasors, frequencyHz } = next.end.measure(timeUs);
      const values = Array.from({ length: 6 }, (_, k) => ({ re: phasors[2 * k]!, im: phasors[2 * k + 1]! }));
      const slot = next.ring.put(timeUs, values);
      next.ring.frequencyHz[next.ring.rowOf(slot)] = frequencyHz;
      next.slot++;
      yield { feedId: next.end.feedId, ring: next.ring, firstSlot: slot, lastSlot: slot };
    }
  }
  return { network, blocks: blocks() };
}

export const unitKinds = {
  M60: { pmuClass: "M", reportingRateHz: 60 },
  M30: { pmuClass: "M", reportingRateHz: 30 },
  P60: { pmuClass: "P", reportingRateHz: 60 },
} as const satisfies Record<string, UnitKind>;
