import fc from "fast-check";
import { describe, expect, it } from "vitest";
import { encodeHeader, type FrameDefect, Framer } from "../../ingest/index.ts";

/** Sixteen frames of different sizes, told apart by their IDCODE. */
const frames = Array.from({ length: 16 }, (_, k) => encodeHeader(1000 + k, "x".repeat(k * 7), 1_700_000_000e6 + k));
const wire = Buffer.concat(frames);

function read(chunks: readonly Uint8Array[], largest = 65_535) {
  const ids: number[] = [];
  const defects: FrameDefect[] = [];
  let skipped = 0;
  let taken = 0;
  const framer = new Framer({
    frame(bytes, at, size) {
      ids.push((bytes[at + 4]! << 8) | bytes[at + 5]!);
      taken += size;
    },
    defect(code, _, n) {
      defects.push(code);
      skipped += n;
    },
  });
  framer.largestFrameBytes = largest;
  for (const chunk of chunks) framer.push(chunk);
  framer.end();
  return { ids, defects, bytes: taken + skipped };
}
const cut = (bytes: Uint8Array, at: readonly number[]) => {
  const sorted = [0, ...[...at].sort((a, b) => a - b), bytes.length];
  return sorted.slice(1).map((end, k) => bytes.subarray(sorted[k]!, end));
};
const all = frames.map((_, k) => 1000 + k);

describe("cutting a stream into frames", () => {
  it("gives every frame once, whatever the cuts between chunks", () => {
    fc.assert(
      fc.property(fc.array(fc.nat(wire.length), { maxLength: 60 }), (at) => {
        expect(read(cut(wire, at))).toEqual({ ids: all, defects: [], bytes: wire.length });
      }),
      { seed: 1, numRuns: 300 },
    );
    expect(read([...wire].map((byte) => Uint8Array.of(byte))).ids).toEqual(all);
  });

  it("survives any bytes, and accounts for every one of them", () => {
    fc.assert(
      fc.property(fc.uint8Array({ maxLength: 600 }), fc.array(fc.nat(600), { maxLength: 10 }), (soup, at) => {
        const chunks = cut(
          soup,
          at.filter((x) => x <= soup.length),
        );
        expect(read(chunks).bytes).toBe(soup.length);
      }),
      { seed: 2, numRuns: 500 },
    );
  });

  it("finds every frame behind garbage that does not look like one", () => {
    fc.assert(
      fc.property(
        fc.uint8Array({ maxLength: 80 }).map((x) => x.filter((b) => b !== 0xaa)),
        (soup) => {
          expect(read([Buffer.concat([soup, wire])]).ids).toEqual(all);
        },
      ),
      { seed: 3, numRuns: 200 },
    );
  });

  it("one damaged byte costs its own frame and no other", () => {
    const offsets = frames.map((_, k) => frames.slice(0, k).reduce((s, f) => s + f.length, 0));
    fc.assert(
      fc.property(fc.nat(wire.length - 1), fc.integer({ min: 1, max: 255 }), (at, flip) => {
        const damaged = Buffer.from(wire);
        damaged[at] = damaged[at]! ^ flip;
        const own = offsets.findLastIndex((o) => o <= at);
        // The bound on size comes from the configuration: no false size reaches past what the stream still brings. A header of 0..105 characters is under 128 bytes.
        const result = read([damaged, Buffer.alloc(128)], 128);
        expect(result.ids.filter((id) => id !== 1000 + own)).toEqual(all.filter((id) => id !== 1000 + own));
        expect(result.defects.length).toBeGreaterThan(0);
      }),
      { seed: 4, numRuns: 600 },
    );
  });

  it("names what was wrong", () => {
    expect(read([Buffer.from([1, 2, 3]), wire]).defects).toEqual(["no-sync"]);
    expect(read([Buffer.from([0xaa, 0xff, 0, 20]), wire]).defects[0]).toBe("unknown-frame-type");
    expect(read([Buffer.from([0xaa, 0x01, 0, 3]), wire]).defects[0]).toBe("size-out-of-bounds");
    expect(read([wire.subarray(0, wire.length - 5)]).defects).toEqual(["truncated"]);
    const bad = Buffer.from(frames[0]!);
    bad[8] = bad[8]! ^ 1;
    expect(read([bad, wire]).defects[0]).toBe("bad-crc");
  });
});
