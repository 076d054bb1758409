/** A stretch of time out of a feed's rotating files, itself a recording: the configuration first, then the frames whose tags lie within. */
import { closeSync, mkdirSync, openSync, readdirSync, readFileSync, renameSync, rmSync, writeSync } from "node:fs";
import { dirname, join } from "node:path";
import { Framer, timeUsOf, typeOf } from "../c37118/index.ts";
import { INDEX_SUFFIX, RECORDING_SUFFIX, startUsOf } from "./file-names.ts";
import { chunks } from "./read-frames.ts";

/** Frames may come late and out of order: this much is read on both sides. */
const DISORDER_US = 5e6;

/**
 * @param folder  of one feed's rotating files
 * @param into    replaced only when the whole stretch has been written
 * @returns how many data frames lie in it; when there are none, nothing is written
 */
export function cutRecording(folder: string, fromUs: number, toUs: number, into: string): number {
  const names = readdirSync(folder)
    .filter((name) => !Number.isNaN(startUsOf(name)))
    .sort();
  const chosen = names.filter(
    (name, k) =>
      startUsOf(name) <= toUs + DISORDER_US && (k + 1 === names.length || startUsOf(names[k + 1]!) >= fromUs - DISORDER_US),
  );
  mkdirSync(dirname(into), { recursive: true });
  const draft = `${into}.draft`;
  const out = openSync(draft, "w");
  let frames = 0;
  let written = "";
  try {
    for (const name of chosen) {
      const { configuration, data } = framesIn(join(folder, name), fromUs, toUs);
      if (data.length === 0) continue;
      const said = configuration.map((frame) => frame.toString("latin1", 14, frame.length - 2)).join();
      if (said !== written) for (const frame of configuration) writeSync(out, frame);
      written = said;
      for (const frame of data) writeSync(out, frame);
      frames += data.length;
    }
  } finally {
    closeSync(out);
  }
  if (frames > 0) renameSync(draft, into);
  else rmSync(draft);
  return frames;
}

function framesIn(path: string, fromUs: number, toUs: number): { configuration: Buffer[]; data: Buffer[] } {
  const configuration: Buffer[] = [];
  const data: Buffer[] = [];
  let timeBase = 1_000_000;
  let isInHead = true;
  let isPast = false;
  const framer = new Framer({
    frame(bytes, at, size) {
      const frame = Buffer.from(bytes.subarray(at, at + size));
      if (typeOf(frame[1]!) !== "data") {
        if (!isInHead) return;
        configuration.push(frame);
        if (configuration.length === 1)
          timeBase = frame.readUInt32BE(typeOf(frame[1]!) === "configuration-3" ? 16 : 14) & 0xff_ffff || 1;
        return;
      }
      isInHead = false;
      const timeUs = timeUsOf(frame.readUInt32BE(6), frame.readUInt32BE(10), timeBase);
      if (timeUs >= fromUs && timeUs <= toUs) data.push(frame);
      if (timeUs > toUs + DISORDER_US) isPast = true;
    },
    defect() {}, // a torn frame is cut; replaying the stretch would tell nothing more
  });
  const file = openSync(path, "r");
  try {
    for (const chunk of chunks(file)) {
      framer.push(chunk);
      if (!isInHead) break;
    }
    data.length = 0; // found again from the index's place on
    framer.end();
    for (const chunk of chunks(file, seek(path, fromUs - DISORDER_US))) {
      framer.push(chunk);
      if (isPast) break;
    }
  } finally {
    closeSync(file);
  }
  return { configuration, data };
}

/** The byte from which on no frame at or after that time is missed; 0 when the index cannot tell. */
function seek(path: string, timeUs: number): number {
  let index: Buffer;
  try {
    index = readFileSync(path.slice(0, -RECORDING_SUFFIX.length) + INDEX_SUFFIX);
  } catch {
    return 0; // without its index a file is read from its start
  }
  let byte = 0;
  for (let at = 0; at + 16 <= index.length && index.readDoubleLE(at) <= timeUs; at += 16) byte = index.readDoubleLE(at + 8);
  return Number.isSafeInteger(byte) && byte >= 0 ? byte : 0;
}
