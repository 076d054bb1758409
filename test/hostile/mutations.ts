/** Seeded damage to byte strings, of the kinds that lines, programs and attackers do. */
import { crcCcitt } from "../../ingest/index.ts";

/** 32 bits of state; the same numbers for the same seed everywhere. Mulberry32, by T. Ettinger, public domain. */
export function seeded(seed: number): (below: number) => number {
  let state = seed >>> 0;
  return (below) => {
    state = (state + 0x6d2b79f5) >>> 0;
    let t = Math.imul(state ^ (state >>> 15), state | 1);
    t ^= t + Math.imul(t ^ (t >>> 7), t | 61);
    return ((t ^ (t >>> 14)) >>> 0) % below;
  };
}

/** Where lengths and counts go wrong. */
const edges = [0, 1, 2, 14, 16, 17, 0x7f, 0x80, 0xff, 0x100, 0x7fff, 0x8000, 0xfffe, 0xffff];
const pick = <T>(all: readonly T[], random: (below: number) => number): T => all[random(all.length)]!;

const kinds: ((bytes: Buffer, random: (below: number) => number, other: Buffer) => Buffer)[] = [
  (b, r) => {
    b[r(b.length)]! ^= 1 << r(8);
    return b;
  },
  (b, r) => {
    b[r(b.length)] = r(256);
    return b;
  },
  (b, r) => {
    if (b.length >= 2) b.writeUInt16BE(pick(edges, r), r(b.length - 1));
    return b;
  },
  (b, r) => b.subarray(0, r(b.length) + 1),
  (b, r) => Buffer.concat([b.subarray(0, r(b.length)), b.subarray(r(b.length))]),
  (b, r) => Buffer.concat([b, b.subarray(r(b.length))]),
  (b, r, other) => Buffer.concat([b.subarray(0, r(b.length)), other.subarray(r(other.length))]),
  (b, r) => {
    const at = r(b.length);
    return Buffer.concat([b.subarray(0, at), Buffer.alloc(1 + r(64), r(256)), b.subarray(at)]);
  },
];

/** One to four kinds of damage; half of the results get sizes and CRCs that fit again, so that what lies behind them is reached. */
export function damaged(bytes: Buffer, random: (below: number) => number, other: Buffer = bytes): Buffer {
  let result = Buffer.from(bytes);
  for (let n = 1 + random(4); n > 0 && result.length > 0; n--) result = Buffer.from(pick(kinds, random)(result, random, other));
  return random(2) ? signed(result) : result;
}

/** Each stretch that begins like a frame becomes one: its CRC is put right; the last takes what is left as its size. */
function signed(bytes: Buffer): Buffer {
  for (let at = 0; at + 16 <= bytes.length; ) {
    if (bytes[at] !== 0xaa) {
      at++;
      continue;
    }
    let size = bytes.readUInt16BE(at + 2);
    if (size < 16 || at + size > bytes.length) {
      size = Math.min(bytes.length - at, 65_535);
      bytes.writeUInt16BE(size, at + 2);
    }
    bytes.writeUInt16BE(crcCcitt(bytes, at, at + size - 2), at + size - 2);
    at += size;
  }
  return bytes;
}
