/** From memory: what cutting, checking, decoding and placing a frame costs, against the least that any reader must do. */

import { setFlagsFromString } from "node:v8";
import { runInNewContext } from "node:vm";
import type { FeedConfig, Terminal } from "../../../config/index.ts";
import { encodeConfig, encodeData, type StreamConfig } from "../../../ingest/index.ts";
import { StreamReader } from "../../../ingest/stream-reader.ts";
import { OnsetDetector } from "../../../pipeline/onset-detector.ts";
import { viewTerminal } from "../../../pipeline/terminal-view.ts";
import { plainNetwork } from "../../pipeline/network.ts";

setFlagsFromString("--expose-gc");
export const collect = runInNewContext("gc") as () => void;

const FRAMES = 200_000;
const PASSES = 9;
const CHUNK_BYTES = 64 * 1024;
const START_US = 1_772_590_440e6;

export function sixPhasors(idCode: number, reportingRateHz = 60): StreamConfig {
  const unit = {
    name: "unit",
    idCode,
    phasorsArePolar: false,
    phasorsAreFloat: true,
    analogsAreFloat: true,
    frequencyIsFloat: true,
  };
  const phasors = ["VA", "VB", "VC", "IA", "IB", "IC"].map((name, k) => ({
    name,
    kind: k < 3 ? ("voltage" as const) : ("current" as const),
    perBit: 1,
  }));
  return {
    idCode,
    timeBase: 1_000_000,
    reportingRateHz,
    units: [{ ...unit, phasors, analogs: [], digitals: [], nominalHz: 60, configurationCount: 1 }],
  };
}

/** The least: sync, size, and CRC with a plain table of 256, byte by byte. */
const plain = Uint16Array.from({ length: 256 }, (_, byte) => {
  let crc = byte << 8;
  for (let bit = 0; bit < 8; bit++) crc = crc & 0x8000 ? ((crc << 1) ^ 0x1021) & 0xffff : (crc << 1) & 0xffff;
  return crc;
});
function bareLoop(bytes: Uint8Array): number {
  let good = 0;
  for (let at = 0; at + 4 <= bytes.length && bytes[at] === 0xaa; ) {
    const size = (bytes[at + 2]! << 8) | bytes[at + 3]!;
    let crc = 0xffff;
    for (let k = at; k < at + size - 2; k++) crc = ((crc << 8) & 0xffff) ^ plain[(crc >> 8) ^ bytes[k]!]!;
    if (crc === ((bytes[at + size - 2]! << 8) | bytes[at + size - 1]!)) good++;
    at += size;
  }
  return good;
}

const timed = (work: () => number): number => {
  const from = process.hrtime.bigint();
  const frames = work();
  if (frames !== FRAMES) throw new Error(`${frames} of ${FRAMES} frames came through`);
  return (frames * 1e9) / Number(process.hrtime.bigint() - from);
};
const median = (all: readonly number[]) => [...all].sort((a, b) => a - b)[all.length >> 1]!;

export function fromMemory() {
  const network = plainNetwork([{ pmuClass: "M", reportingRateHz: 60 }]);
  const feed = network.feeds[0] as FeedConfig;
  const config = sixPhasors(feed.idCode);
  const configuration = encodeConfig(config, "configuration-2", START_US);
  // Balanced load with a little noise; seeded by the index, the same every time.
  const frames = Buffer.concat(
    Array.from({ length: FRAMES }, (_, n) => {
      const phasors = Array.from({ length: 12 }, (_, k) => {
        const angle = (-2 * Math.PI * ((k >> 1) % 3)) / 3;
        return (k < 6 ? 132_790 : 400) * (k % 2 ? Math.sin(angle) : Math.cos(angle)) + Math.sin(n * 7 + k);
      });
      return encodeData(config, START_US + Math.round((n * 1e6) / 60), [{ stat: 0, phasors, frequencyHz: 60, rocofHzPerS: 0 }]);
    }),
  );
  const chunks: Buffer[] = [];
  for (let at = 0; at < frames.length; at += CHUNK_BYTES) chunks.push(frames.subarray(at, at + CHUNK_BYTES));

  const reading = (onRow: (slot: number, reader: StreamReader) => void) => {
    const reader: StreamReader = new StreamReader(feed, {
      onConfiguration: () => {},
      onRow: (slot) => onRow(slot, reader),
      onDefect: (code, words) => {
        throw new Error(`${code}: ${words}`);
      },
    });
    reader.push(configuration);
    return reader;
  };
  const toRing = () => {
    const reader = reading(() => {});
    for (const chunk of chunks) reader.push(chunk, START_US);
    return reader.frames;
  };
  const toOnset = () => {
    let detector: OnsetDetector | undefined;
    const terminal = network.lines[0]!.terminals.find((t): t is Terminal => t.measured?.feedId === feed.id)!;
    const reader = reading((slot, { ring }) => {
      if (!detector) {
        const bound = viewTerminal(terminal, ring!);
        if ("problem" in bound) throw new Error(bound.problem);
        detector = new OnsetDetector(bound.view);
      }
      if (detector.step(slot)) throw new Error("an onset in an undisturbed stream");
    });
    for (const chunk of chunks) reader.push(chunk, START_US);
    return reader.frames;
  };
  const speeds = { bare: [] as number[], ring: [] as number[], onset: [] as number[] };
  for (let pass = 0; pass < PASSES; pass++) {
    speeds.bare.push(timed(() => bareLoop(frames)));
    speeds.ring.push(timed(toRing));
    speeds.onset.push(timed(toOnset));
  }
  return {
    bareFramesPerS: median(speeds.bare),
    ringFramesPerS: median(speeds.ring),
    onsetFramesPerS: median(speeds.onset),
    ringToBare: median(speeds.ring) / median(speeds.bare),
    heapBytesPerFrame: allocation(
      reading(() => {}),
      chunks,
      config,
    ),
  };
}

/** Heap growth while frames go through a reader that is warm, no collection between. */
function allocation(reader: StreamReader, chunks: readonly Buffer[], config: StreamConfig): number {
  const perChunk = Math.floor(
    CHUNK_BYTES / encodeData(config, 0, [{ stat: 0, phasors: new Float64Array(12), frequencyHz: 0, rocofHzPerS: 0 }]).length,
  );
  const grown: number[] = [];
  const step = 20;
  for (let from = 0; from + step <= chunks.length; from += step) {
    collect();
    const before = process.memoryUsage().heapUsed;
    for (let k = from; k < from + step; k++) reader.push(chunks[k]!, START_US);
    grown.push((process.memoryUsage().heapUsed - before) / (step * perChunk));
  }
  return median(grown);
}
