/** One side of the comparison, a process of its own: `receiver.ts drain|ingest|idle PORT FEEDS SECONDS`. Tells its figures to its parent and ends. */
import { connect } from "node:net";
import pino from "pino";
import type { Network } from "../../../config/index.ts";
import { encodeCommand, openFeeds } from "../../../ingest/index.ts";
import { WritableRing } from "../../../ingest/ring.ts";
import { collect, sixPhasors } from "./memory.ts";

const [mode, port, feedCount, seconds] = [
  process.argv[2]!,
  Number(process.argv[3]),
  Number(process.argv[4]),
  Number(process.argv[5]),
];
const SETTLE_MS = 4000;
const pause = (ms: number) => new Promise<void>((done) => setTimeout(done, ms));
const FRAME_BYTES = 74;

async function measured(frames: () => number): Promise<{ frames: number; cpuUsPerFrame: number; busy: number; seconds: number }> {
  const cpu = process.cpuUsage();
  const from = performance.now();
  const before = frames();
  await pause(seconds * 1000);
  const used = process.cpuUsage(cpu);
  const cpuUs = used.user + used.system;
  const ms = performance.now() - from;
  const got = frames() - before;
  return { frames: got, cpuUsPerFrame: cpuUs / got, busy: cpuUs / 1000 / ms, seconds: ms / 1000 };
}

async function drain(): Promise<object> {
  let bytes = 0;
  const sockets = Array.from({ length: feedCount }, (_, k) => {
    const socket = connect({ host: "127.0.0.1", port });
    socket.setNoDelay(true);
    socket.on("connect", () => socket.write(encodeCommand(k + 1, "data-on", 0)));
    socket.on("data", (chunk) => {
      bytes += chunk.length;
    });
    return socket;
  });
  await pause(SETTLE_MS);
  const figures = await measured(() => bytes / FRAME_BYTES);
  for (const socket of sockets) socket.destroy();
  return figures;
}

const network = (): Network =>
  ({
    name: "benchmark",
    stations: [],
    lines: [],
    channels: [],
    feeds: Array.from({ length: feedCount }, (_, k) => ({
      id: `feed-${k + 1}`,
      idCode: k + 1,
      address: `tcp://127.0.0.1:${port}`,
      pmuClass: "M",
      reportingRateHz: 60,
    })),
  }) as unknown as Network;

async function ingest(): Promise<object> {
  const feeds = openFeeds(network(), { log: pino({ level: "silent" }) });
  let frames = 0;
  let isMeasuring = false;
  /** Latencies in classes of 0.1 ms; the last holds all beyond. */
  const classes = new Uint32Array(10_001);
  const numbers = new Map<string, number>();
  let lost = 0;
  feeds.blocks.subscribe(({ feedId, ring, firstSlot, lastSlot }) => {
    const nowUs = (performance.timeOrigin + performance.now()) * 1000;
    for (let slot = firstSlot; slot <= lastSlot; slot++) {
      const row = ring.rowOf(slot);
      if (row < 0) continue;
      frames++;
      const number = ring.frequencyHz[row]!;
      lost += number - (numbers.get(feedId) ?? number - 1) - 1;
      numbers.set(feedId, number);
      if (isMeasuring)
        classes[Math.max(0, Math.min(10_000, Math.floor((nowUs - ring.timeUs[row]! - ring.rocofHzPerS[row]!) / 100)))]!++;
    }
  });
  await pause(SETTLE_MS);
  isMeasuring = true;
  const figures = await measured(() => frames);
  isMeasuring = false;
  const total = classes.reduce((a, b) => a + b, 0);
  const quantile = (share: number) => {
    let seen = 0;
    const at = classes.findIndex((n) => {
      seen += n;
      return seen >= share * total;
    });
    return at / 10;
  };
  let health: readonly { state: string; defects: object }[] = [];
  feeds.health.subscribe((now) => {
    health = now;
  });
  await pause(1500);
  const defects = health.filter((h) => Object.keys(h.defects).length > 0).length;
  const live = health.filter((h) => h.state === "live").length;
  void feeds.stop();
  return {
    ...figures,
    lost,
    feedsWithDefects: defects,
    live,
    medianMs: quantile(0.5),
    p99Ms: quantile(0.99),
    worstMs: quantile(1),
  };
}

/** What a connected, configured feed that sends nothing holds besides its ring. */
async function idle(): Promise<object> {
  collect();
  const held = () => {
    collect();
    const { heapUsed, external } = process.memoryUsage();
    return heapUsed + external;
  };
  const before = held();
  const feeds = openFeeds(network(), { log: pino({ level: "silent" }) });
  let live = 0;
  feeds.health.subscribe((now) => {
    live = now.filter((h) => h.state === "live").length;
  });
  for (let turn = 0; turn < 100 && live < feedCount; turn++) await pause(100);
  const after = held();
  const ring = Object.values(new WritableRing("one", sixPhasors(1))).reduce<number>(
    (sum, part) => sum + (ArrayBuffer.isView(part) ? part.byteLength : 0),
    0,
  );
  const slotOfRowBytes = 8 * new WritableRing("one", sixPhasors(1)).capacity; // private, so not among the values
  void feeds.stop();
  return { live, bytesPerFeed: (after - before) / feedCount - ring - slotOfRowBytes, ringBytes: ring + slotOfRowBytes };
}

const figures = await { drain, ingest, idle }[mode as "drain" | "ingest" | "idle"]();
process.send!(figures, () => process.exit(0));
