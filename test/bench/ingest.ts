/**
 * What ingest costs: `npm run bench:ingest [-- --seconds N --feeds N]`. All ratios come from one run on one machine, each process beside its own bare
 * counterpart; figures go to test/bench/results/ingest.json and ingest-growth.svg.
 */
import { fork } from "node:child_process";
import { mkdirSync, writeFileSync } from "node:fs";
import { cpus, loadavg } from "node:os";
import { fileURLToPath } from "node:url";
import { parseArgs } from "node:util";
import { growthPicture } from "./ingest/growth-picture.ts";
import { fromMemory } from "./ingest/memory.ts";

const { values } = parseArgs({
  options: { seconds: { type: "string", default: "60" }, feeds: { type: "string", default: "2000" } },
});
const seconds = Number(values.seconds);
const feeds = Number(values.feeds);
const path = (name: string) => fileURLToPath(new URL(name, import.meta.url));

interface Figures {
  readonly frames: number;
  readonly seconds: number;
  readonly cpuUsPerFrame: number;
  readonly busy: number;
  readonly lost?: number;
  readonly feedsWithDefects?: number;
  readonly live?: number;
  readonly medianMs?: number;
  readonly p99Ms?: number;
  readonly worstMs?: number;
  readonly bytesPerFeed?: number;
}

/** A sender and a receiver, each a process; both are gone when it resolves. */
async function run(mode: "drain" | "ingest" | "idle", count: number, forS: number): Promise<Figures> {
  const sender = fork(path("ingest/sender.ts"), mode === "idle" ? ["idle"] : []);
  const { port } = await new Promise<{ port: number }>((done) => sender.once("message", (m) => done(m as { port: number })));
  const receiver = fork(path("ingest/receiver.ts"), [mode, String(port), String(count), String(forS)]);
  const figures = await new Promise<Figures>((done, fail) => {
    receiver.once("message", (m) => done(m as Figures));
    receiver.once("exit", (code) => fail(new Error(`the receiver ended with ${code}`)));
  });
  sender.disconnect();
  await Promise.all(
    [sender, receiver].map((p) => (p.exitCode === null ? new Promise((done) => p.once("exit", done)) : undefined)),
  );
  return figures;
}

const fixed = (n: number, digits = 2) => n.toFixed(digits);
const load = loadavg()[0]!;
console.log(`${cpus().length} × ${cpus()[0]?.model}, load ${fixed(load)} before the run, Node ${process.version}\n`);

const memory = fromMemory();
console.log(`from memory, six float32 phasors [frames/s]
  framing and bytewise CRC only   ${fixed(memory.bareFramesPerS / 1e6)} million
  codec, CRC and ring             ${fixed(memory.ringFramesPerS / 1e6)} million: ${fixed(memory.ringToBare)} of it (bar 0.8)
  and through onset detection     ${fixed(memory.onsetFramesPerS / 1e6)} million (bar 1)
  heap per frame                  ${fixed(memory.heapBytesPerFrame)} bytes\n`);

const idle = await run("idle", feeds, 0);
console.log(`idle feeds: ${idle.live} live, ${fixed(idle.bytesPerFeed! / 1000, 1)} kB each besides the ring (bar 100)\n`);

const growth = [];
for (const count of [10, 100, 500, 1000, feeds].filter((n, k, all) => n <= feeds && all.indexOf(n) === k)) {
  const forS = count === feeds ? seconds : Math.min(seconds, 8);
  const bare = await run("drain", count, Math.min(forS, 20));
  const ours = await run("ingest", count, forS);
  growth.push({ feeds: count, bare, ours, ratio: ours.cpuUsPerFrame / bare.cpuUsPerFrame });
  console.log(
    `${count} feeds at 60 frames/s over TCP, ${fixed(ours.seconds, 0)} s: ${fixed(ours.frames / ours.seconds, 0)} frames/s of ${60 * count} due, lost between sender and ring ${ours.lost}, feeds with defects ${ours.feedsWithDefects}, live ${ours.live}
  processor per frame ${fixed(ours.cpuUsPerFrame)} µs, bare drain ${fixed(bare.cpuUsPerFrame)} µs (${fixed(bare.frames / bare.seconds, 0)} frames/s): ${fixed(ours.cpuUsPerFrame / bare.cpuUsPerFrame)} times (bar 1.6); busy ${fixed(100 * ours.busy, 0)} %
  sent to ring: median ${ours.medianMs} ms, 99 % ${ours.p99Ms} ms (bar 20), worst ${ours.worstMs} ms`,
  );
}
mkdirSync(path("results"), { recursive: true });
writeFileSync(
  path("results/ingest.json"),
  `${JSON.stringify({ processor: cpus()[0]?.model, cores: cpus().length, loadBefore: load, node: process.version, memory, idle, growth }, null, 2)}\n`,
);
writeFileSync(path("results/ingest-growth.svg"), growthPicture(growth));
