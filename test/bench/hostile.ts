/** A million damaged frames: `npm run bench:hostile`. Ends with exit 1 when an exception escapes or memory grows. */
import { consumer } from "../hostile/consume.ts";
import { damaged, seeded } from "../hostile/mutations.ts";
import { corpus, seeds } from "../hostile/seeds.ts";
import { collect } from "./ingest/memory.ts";

const COUNT = 1_000_000;
/** What a ring more or less, and code that got compiled, may make. */
const MOST_GROWTH_BYTES = 8e6;
const random = seeded(1);
const pool = [...seeds(), ...corpus()];
const hostile = consumer();
const held = () => {
  collect();
  const { heapUsed, external } = process.memoryUsage();
  return heapUsed + external;
};
let before = 0;
const from = performance.now();
for (let n = 0; n < COUNT; n++) {
  if (n === COUNT / 10) before = held();
  hostile.feed(damaged(pool[random(pool.length)]!, random, pool[random(pool.length)]!).subarray(0, 4096));
}
const grown = held() - before;
const { reader, rows } = hostile;
console.log(
  `${COUNT} damaged inputs in ${((performance.now() - from) / 1000).toFixed(0)} s: no exception; ${rows} rows; memory grew by ${(grown / 1000).toFixed(0)} kB after the first tenth\n${JSON.stringify(reader.defects)}`,
);
if (grown > MOST_GROWTH_BYTES) process.exitCode = 1;
