/**
 * Looks for inputs that reach new branches of the codec and keeps them: `npm run fuzz [-- --seconds N --seed N]`. Coverage is V8's own, per block and per
 * input; an input is kept when it runs a block of ingest/ that no kept one has run. Ends with exit 1 and the input when an exception escapes.
 */
import { createHash } from "node:crypto";
import { writeFileSync } from "node:fs";
import { type Profiler, Session } from "node:inspector/promises";
import { parseArgs } from "node:util";
import { consumer } from "./consume.ts";
import { damaged, seeded } from "./mutations.ts";
import { corpus, seeds } from "./seeds.ts";

const { values } = parseArgs({ options: { seconds: { type: "string", default: "60" }, seed: { type: "string", default: "1" } } });
const random = seeded(Number(values.seed));
const session = new Session();
session.connect();
await session.post("Profiler.enable");
await session.post("Profiler.startPreciseCoverage", { callCount: true, detailed: true });

const seen = new Set<string>();
/** How many blocks of ingest/ ran for the first time. */
function newBlocks(result: readonly Profiler.ScriptCoverage[]): number {
  const before = seen.size;
  for (const script of result) {
    if (!/\/ingest\/(c37118\/|stream-reader|ring)/.test(script.url)) continue;
    const file = script.url.slice(script.url.lastIndexOf("/ingest/"));
    for (const { ranges } of script.functions)
      for (const { startOffset, endOffset, count } of ranges) if (count > 0) seen.add(`${file}:${startOffset}-${endOffset}`);
  }
  return seen.size - before;
}

async function run(input: Buffer): Promise<number> {
  try {
    consumer().feed(input);
  } catch (error) {
    console.error(`an exception escaped for the input ${input.toString("hex")}`);
    throw error;
  }
  const { result } = await session.post("Profiler.takePreciseCoverage");
  return newBlocks(result);
}

const pool = [...seeds(), ...corpus()];
for (const input of pool) await run(input);
console.log(`${pool.length} inputs to begin with, ${seen.size} blocks`);
const until = Date.now() + Number(values.seconds) * 1000;
let tried = 0;
let kept = 0;
while (Date.now() < until) {
  const input = damaged(pool[random(pool.length)]!, random, pool[random(pool.length)]!).subarray(0, 4096);
  tried++;
  if ((await run(input)) === 0) continue;
  kept++;
  pool.push(input);
  const name = createHash("sha256").update(input).digest("hex").slice(0, 16);
  writeFileSync(new URL(`corpus/${name}`, import.meta.url), input);
}
console.log(`${tried} inputs tried, ${kept} kept, ${seen.size} blocks of the codec reached`);
session.disconnect();
