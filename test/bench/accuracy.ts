/**
 * How far from the truth, and how honest: `npm run bench:accuracy [-- --cases N]`. Seeded faults of the simulator (which shares no electrical code with the
 * pipeline) through the whole pipeline; prints median, 90th percentile and worst error in % of the line, coverage and width of the 90 % stretch, wrong phases, missed.
 */
import { mkdirSync, writeFileSync } from "node:fs";
import { fileURLToPath } from "node:url";
import { parseArgs } from "node:util";
import type { FrameRing } from "../../ingest/types.ts";
import { DisturbanceTracker } from "../../pipeline/index.ts";
import type { FaultLocated, FaultType } from "../../pipeline/types.ts";
import { accuracyPicture } from "./accuracy-picture.ts";
import { type CampaignOptions, campaignCase, framesOf, type UnitKind, unitKinds } from "./campaign.ts";
import { textbookKm } from "./textbook.ts";

const { values } = parseArgs({
  options: {
    cases: { type: "string", default: "300" },
    seed: { type: "string", default: "1" },
    verbose: { type: "boolean", default: false },
    rows: { type: "string", default: "" },
  },
});
const options: CampaignOptions = {
  cases: Number(values.cases),
  seed: Number(values.seed),
  noise: 0.001,
  instrumentErrors: 1,
  constantError: 0.01,
};
const { M60, M30, P60 } = unitKinds;
/** Bars: % of the line, median / 90th percentile. */
const rows: { name: string; units: readonly (UnitKind | undefined)[]; bar: readonly [number, number] }[] = [
  { name: "two ends, M class 60", units: [M60, M60], bar: [0.25, 0.8] },
  { name: "two ends, M class 30", units: [M30, M30], bar: [0.25, 0.8] },
  { name: "one end, M class 60", units: [M60, undefined], bar: [0.4, 1.5] },
  { name: "one end, M class 30", units: [M30, undefined], bar: [0.6, 2.0] },
  { name: "one end, P class 60", units: [P60, undefined], bar: [0.4, 1.2] },
];

interface Outcome {
  readonly errorKm: number;
  readonly isCovered: boolean;
  readonly widthKm: number;
  readonly isPhaseRight: boolean;
  readonly textbookKm: number;
}

const chosen = values.rows === "" ? rows.map((_, k) => k) : values.rows.split(",").map(Number);
const quantile = (x: readonly number[], q: number): number =>
  [...x].sort((a, b) => a - b)[Math.min(x.length - 1, Math.floor(q * x.length))] ?? Number.NaN;
const lengthKm = 148.2;
const outcomes = rows.map((): (Outcome | undefined)[] => []);
let slowest = 0;
const ourMs: number[] = [];
for (let n = 0; n < options.cases; n++) {
  const c = campaignCase(n, options);
  rows.forEach((row, r) => {
    if (!chosen.includes(r)) return;
    const { network, blocks } = framesOf(c, row.units, options);
    const tracker = new DisturbanceTracker(network);
    const events = [];
    const rings = new Map<string, FrameRing>();
    for (const block of blocks) {
      rings.set(block.feedId, block.ring);
      const before = performance.now();
      const found = tracker.step(block);
      const ms = performance.now() - before;
      if (found.some((e) => e.kind === "located")) ourMs.push(ms);
      slowest = Math.max(slowest, ms);
      events.push(...found);
    }
    events.push(...tracker.finish());
    const last = events.findLast((e): e is FaultLocated => e.kind === "located");
    const isOut = events.some((e) => e.kind === "outside");
    if (!last || isOut || last.location.km === null) {
      outcomes[r]!.push(undefined);
      if (values.verbose)
        console.log(
          `${row.name} #${n}: missed ${c.fault.type} ${c.fault.km.toFixed(1)} km ${c.fault.ohm} ohm ${(c.durationS * 1e3).toFixed(0)} ms: ${events.map((e) => (e.kind === "outside" ? e.reason : e.kind)).join()}`,
        );
      return;
    }
    const { km, pieces, phases } = last.location;
    const outcome: Outcome = {
      errorKm: Math.abs(km - c.fault.km),
      isCovered: pieces.some((p) => c.fault.km >= p.lowKm && c.fault.km <= p.highKm),
      widthKm: pieces.reduce((s, p) => s + p.highKm - p.lowKm, 0),
      isPhaseRight: phases === c.fault.type,
      textbookKm: Math.abs(
        textbookKm(network.lines[0]!, c.fault.type as FaultType, [...rings.values()], c.onsetUs, c.durationS) - c.fault.km,
      ),
    };
    outcomes[r]!.push(outcome);
    if (values.verbose && outcome.errorKm > (1.5 * row.bar[1] * lengthKm) / 100)
      console.log(
        `${row.name} #${n}: ${outcome.errorKm.toFixed(1)} km off, ${c.fault.type} -> ${phases} ${c.fault.km.toFixed(1)} km ${c.fault.ohm} ohm ${(c.durationS * 1e3).toFixed(0)} ms: ${last.location.reasons.join("; ")}`,
      );
  });
  if (process.stderr.isTTY) process.stderr.write(`\r${n + 1} of ${options.cases} faults`);
}
if (process.stderr.isTTY) process.stderr.write("\n");

const table = rows.map((row, r) => {
  const got = outcomes[r]!.filter((o) => o !== undefined);
  const percent = got.map((o) => (100 * o.errorKm) / lengthKm);
  return {
    situation: row.name,
    faults: outcomes[r]!.length,
    medianPercent: quantile(percent, 0.5),
    p90Percent: quantile(percent, 0.9),
    worstPercent: Math.max(...percent),
    barPercent: row.bar,
    textbookMedianPercent:
      (100 *
        quantile(
          got.map((o) => o.textbookKm),
          0.5,
        )) /
      lengthKm,
    textbookP90Percent:
      (100 *
        quantile(
          got.map((o) => o.textbookKm),
          0.9,
        )) /
      lengthKm,
    medianKm: quantile(
      got.map((o) => o.errorKm),
      0.5,
    ),
    p90Km: quantile(
      got.map((o) => o.errorKm),
      0.9,
    ),
    coverage: got.filter((o) => o.isCovered).length / got.length,
    medianWidthPercent:
      (100 *
        quantile(
          got.map((o) => o.widthKm),
          0.5,
        )) /
      lengthKm,
    wrongPhases: got.filter((o) => !o.isPhaseRight).length,
    missed: outcomes[r]!.length - got.length,
  };
});
console.log(
  "situation                 median   p90   worst %   bar          covered  width %  phases wrong  missed  textbook, mid-fault frame",
);
for (const t of table) {
  console.log(
    `${t.situation.padEnd(24)} ${t.medianPercent.toFixed(2).padStart(6)} ${t.p90Percent.toFixed(2).padStart(6)} ${t.worstPercent.toFixed(1).padStart(7)}   ${t.barPercent.map((b) => b.toFixed(2)).join(" / ")}  ${(100 * t.coverage).toFixed(0).padStart(6)} % ${t.medianWidthPercent.toFixed(2).padStart(7)}  ${String(t.wrongPhases).padStart(8)} ${String(t.missed).padStart(8)}  ${t.textbookMedianPercent.toFixed(2).padStart(8)} / ${t.textbookP90Percent.toFixed(2)}`,
  );
}
console.log(
  `our share from frame to estimate: median ${quantile(ourMs, 0.5).toFixed(1)} ms, 99th percentile ${quantile(ourMs, 0.99).toFixed(1)} ms`,
);
const folder = fileURLToPath(new URL("./results/", import.meta.url));
mkdirSync(folder, { recursive: true });
writeFileSync(`${folder}accuracy.json`, `${JSON.stringify({ options, table }, null, 2)}\n`);
const caption = `${options.cases} seeded faults, 50-120 ms, 0-50 ohm, class 0.5 instruments, 1 % line constants, 0.1 % noise.`;
writeFileSync(`${folder}accuracy.svg`, accuracyPicture(table, caption));
