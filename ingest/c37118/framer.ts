/**
 * Cuts a byte stream into frames. Order of trust: sync, size within bounds, whole frame here, CRC; only then is anything in it looked at. After a bad
 * CRC the search goes on one byte further, not by the claimed size: the size may be what is broken.
 */
import { crcCcitt } from "./checksum.ts";
import { LARGEST_FRAME_BYTES, SMALLEST_FRAME_BYTES, SYNC_BYTE, typeOf } from "./common-header.ts";
import type { FrameDefect } from "./defects.ts";

/** What one look at the front of the bytes can say. Needing more is an answer, not an error. */
export type Look =
  | { readonly kind: "frame"; readonly bytes: number }
  | { readonly kind: "wait"; readonly bytes: number }
  | { readonly kind: "defect"; readonly code: FrameDefect; readonly skipBytes: number };

/** The answers, one of each kind for all looks: a frame then costs no allocation. An answer holds until the next look. */
const answers = {
  frame: { kind: "frame" as const, bytes: 0 },
  wait: { kind: "wait" as const, bytes: 0 },
  defect: { kind: "defect" as const, code: "no-sync" as FrameDefect, skipBytes: 0 },
};
function found<K extends "frame" | "wait">(kind: K, bytes: number): (typeof answers)[K] {
  answers[kind].bytes = bytes;
  return answers[kind];
}
function defect(code: FrameDefect, skipBytes: number): Look {
  answers.defect.code = code;
  answers.defect.skipBytes = skipBytes;
  return answers.defect;
}

/** @param largest  frames above this are a false start: from the configuration, so that one cannot hold the queue for long */
function lookAt(bytes: Uint8Array, at: number, end: number, largest: number): Look {
  if (bytes[at] !== SYNC_BYTE) {
    let skip = 1;
    while (at + skip < end && bytes[at + skip] !== SYNC_BYTE) skip++;
    return defect("no-sync", skip);
  }
  if (end - at < 4) return found("wait", 4);
  if (typeOf(bytes[at + 1]!) === undefined) return defect("unknown-frame-type", 1);
  const size = (bytes[at + 2]! << 8) | bytes[at + 3]!;
  if (size < SMALLEST_FRAME_BYTES || size > largest) return defect("size-out-of-bounds", 1);
  if (end - at < size) return found("wait", size);
  const stated = (bytes[at + size - 2]! << 8) | bytes[at + size - 1]!;
  if (crcCcitt(bytes, at, at + size - 2) !== stated) return defect("bad-crc", 1);
  return found("frame", size);
}

export interface FramerSink {
  /** A whole frame with a good CRC at `bytes[at..at+size)`; valid during the call only. */
  frame(bytes: Uint8Array, at: number, size: number): void;
  /** @param offset  in the stream since its start */
  defect(code: FrameDefect, offset: number, skippedBytes: number): void;
}

/**
 * Feeds on chunks as a socket gives them. Holds at most one frame's worth of unfinished bytes; a frame that lies whole in a chunk is looked at in place.
 */
export class Framer {
  readonly #sink: FramerSink;
  /** The unfinished bytes are `#rest[#from..#to)`. */
  #rest = new Uint8Array(0);
  #from = 0;
  #to = 0;
  #offset = 0;
  /** Size bound; lowered once the configuration is known. */
  largestFrameBytes = LARGEST_FRAME_BYTES;

  constructor(sink: FramerSink) {
    this.#sink = sink;
  }

  push(chunk: Uint8Array): void {
    let used = 0;
    while (this.#from < this.#to) {
      // Bring over only what the unfinished frame still lacks, and look again.
      const look = lookAt(this.#rest, this.#from, this.#to, this.largestFrameBytes);
      if (look.kind !== "wait") {
        const at = this.#from;
        this.#from += look.kind === "frame" ? look.bytes : look.skipBytes;
        this.#act(look, this.#rest, at);
        continue;
      }
      const lacking = Math.min(look.bytes - (this.#to - this.#from), chunk.length - used);
      if (lacking === 0) return;
      this.#append(chunk.subarray(used, used + lacking));
      used += lacking;
    }
    while (used < chunk.length) {
      const look = lookAt(chunk, used, chunk.length, this.largestFrameBytes);
      if (look.kind === "wait") {
        this.#append(chunk.subarray(used));
        return;
      }
      const at = used;
      used += look.kind === "frame" ? look.bytes : look.skipBytes;
      this.#act(look, chunk, at);
    }
  }

  /** The stream ended: what is left is a frame cut short. */
  end(): void {
    if (this.#from < this.#to) this.#sink.defect("truncated", this.#offset, this.#to - this.#from);
    this.#from = 0;
    this.#to = 0;
  }

  #act(look: Exclude<Look, { kind: "wait" }>, bytes: Uint8Array, at: number): void {
    const offset = this.#offset;
    if (look.kind === "frame") {
      this.#offset += look.bytes;
      this.#sink.frame(bytes, at, look.bytes);
    } else {
      this.#offset += look.skipBytes;
      this.#sink.defect(look.code, offset, look.skipBytes);
    }
  }

  #append(piece: Uint8Array): void {
    const kept = this.#to - this.#from;
    if (this.#to + piece.length > this.#rest.length) {
      // Moved to the front only when the end is reached, so that skipping byte by byte costs no copying.
      const needed = kept + piece.length;
      const next = needed > this.#rest.length ? new Uint8Array(Math.max(needed, 2 * this.#rest.length, 256)) : this.#rest;
      if (next === this.#rest) next.copyWithin(0, this.#from, this.#to);
      else next.set(this.#rest.subarray(this.#from, this.#to));
      this.#rest = next;
      this.#from = 0;
      this.#to = kept;
    }
    this.#rest.set(piece, this.#to);
    this.#to += piece.length;
  }
}
