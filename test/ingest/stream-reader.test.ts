/** From bytes to rows, with any stream: whatever the cuts, whatever the garbage, whatever byte is damaged. */
import fc from "fast-check";
import { describe, expect, it } from "vitest";
import {
  BadConfiguration,
  crcCcitt,
  dataFrameBytes,
  decodeConfig,
  encodeConfig,
  encodeData,
  type StreamConfig,
  type UnitConfig,
} from "../../ingest/index.ts";
import { StreamReader } from "../../ingest/stream-reader.ts";
import { plainNetwork } from "../pipeline/network.ts";

const SECOND_US = 1_772_590_440e6;
const feed = { ...plainNetwork([{ pmuClass: "M", reportingRateHz: 50 }]).feeds[0]!, idCode: 7 };

const name = fc.string({ unit: fc.constantFrom(..."ABCabc019-_"), minLength: 1, maxLength: 16 });
const word = fc.nat(0xffff);
const unit: fc.Arbitrary<UnitConfig> = fc.record({
  name,
  idCode: fc.integer({ min: 1, max: 65_534 }),
  phasorsArePolar: fc.boolean(),
  phasorsAreFloat: fc.boolean(),
  analogsAreFloat: fc.boolean(),
  frequencyIsFloat: fc.boolean(),
  phasors: fc.array(
    fc.record({
      name,
      kind: fc.constantFrom("voltage" as const, "current" as const),
      perBit: fc.integer({ min: 1, max: 0xff_ffff }).map((n) => n * 1e-5),
    }),
    { maxLength: 5 },
  ),
  analogs: fc.array(
    fc.record({
      name,
      kind: fc.constantFrom("instantaneous" as const, "rms" as const, "peak" as const),
      scale: fc.integer({ min: -0x80_0000, max: 0x7f_ffff }),
    }),
    { maxLength: 3 },
  ),
  digitals: fc.array(fc.record({ names: fc.array(name, { minLength: 16, maxLength: 16 }), normal: word, valid: word }), {
    maxLength: 2,
  }),
  nominalHz: fc.constantFrom(50 as const, 60 as const),
  configurationCount: word,
});
const stream: fc.Arbitrary<StreamConfig> = fc.record({
  idCode: fc.constant(feed.idCode),
  timeBase: fc.constantFrom(1_000_000, 1_000, 0xff_ffff),
  units: fc.array(unit, { minLength: 1, maxLength: 4 }),
  reportingRateHz: fc.constant(50),
});

/** A configuration and its first `count` data frames; phasor k of frame n is (n + 1) · (100 + k) volt or ampere at once. */
function wireOf(config: StreamConfig, count: number): Buffer[] {
  const frames = [encodeConfig(config, "configuration-2", SECOND_US)];
  for (let n = 0; n < count; n++) {
    frames.push(
      encodeData(
        config,
        SECOND_US + n * 20_000,
        config.units.map((u, k) => ({
          stat: n + k,
          phasors: u.phasors.flatMap((p, m) => [(n + 1) * (100 + m) * p.perBit, 0]),
          frequencyHz: u.nominalHz + n / 1000,
          rocofHzPerS: n / 100,
        })),
      ),
    );
  }
  return frames;
}
function read(chunks: readonly Uint8Array[]) {
  const slots: number[] = [];
  const reader = new StreamReader(feed, { onConfiguration() {}, onDefect() {}, onRow: (slot) => slots.push(slot) });
  for (const chunk of chunks) reader.push(chunk);
  reader.end();
  return { reader, slots: slots.map((slot) => slot - (SECOND_US / 1e6) * 50) };
}
const cut = (bytes: Uint8Array, at: readonly number[]) => {
  const sorted = [0, ...at.map((x) => x % (bytes.length + 1)).sort((a, b) => a - b), bytes.length];
  return sorted.slice(1).map((end, k) => bytes.subarray(sorted[k]!, end));
};

describe("from bytes to rows", () => {
  it("a configuration says after the wire what it said before", () => {
    fc.assert(
      fc.property(stream, (config) => {
        const back = decodeConfig(encodeConfig(config, "configuration-2", SECOND_US));
        for (const [k, u] of back.units.entries()) {
          const sent = config.units[k]!;
          for (const [m, p] of u.phasors.entries()) expect(p.perBit).toBeCloseTo(sent.phasors[m]!.perBit, 9);
          expect({ ...u, phasors: u.phasors.map((p) => ({ ...p, perBit: 0 })) }).toEqual({
            ...sent,
            phasors: sent.phasors.map((p) => ({ ...p, perBit: 0 })),
          });
        }
        expect({ ...back, units: [] }).toEqual({ ...config, units: [] });
      }),
      { seed: 11, numRuns: 200 },
    );
  });

  it("every frame becomes its row with its values, whatever the formats, units and cuts", () => {
    fc.assert(
      fc.property(stream, fc.array(fc.nat(), { maxLength: 30 }), (config, cuts) => {
        const { reader, slots } = read(cut(Buffer.concat(wireOf(config, 8)), cuts));
        expect(slots).toEqual([0, 1, 2, 3, 4, 5, 6, 7]);
        const ring = reader.ring!;
        for (let n = 0; n < 8; n++) {
          const row = ring.rowOf((SECOND_US / 1e6) * 50 + n);
          let column = 0;
          for (const [k, u] of config.units.entries()) {
            expect(ring.stat[row * ring.units.length + k]).toBe(n + k);
            // float32 keeps 24 bits of the frequency; integers hold whole mHz, and n are whole mHz.
            expect(ring.frequencyHz[row * ring.units.length + k]).toBeCloseTo(u.nominalHz + n / 1000, 5);
            for (const [m, p] of u.phasors.entries()) {
              const sent = (n + 1) * (100 + m) * p.perBit; // whole bits: exact in integers, 24 bits in float32
              expect(Math.abs(ring.phasors[2 * (row * ring.columns.length + column)]! - sent)).toBeLessThanOrEqual(sent * 1e-7);
              column++;
            }
          }
        }
        expect(Object.values(reader.defects).every((count) => count === 0)).toBe(true);
      }),
      { seed: 12, numRuns: 150 },
    );
  });

  it("one damaged byte costs its own frame and no other", () => {
    fc.assert(
      fc.property(
        stream,
        fc.nat(7),
        fc.oneof(fc.constantFrom(0, 1, 2, 3, 4, 5), fc.nat()), // sync, size and IDCODE are where it can go wrong
        fc.integer({ min: 1, max: 255 }),
        fc.array(fc.nat(), { maxLength: 5 }),
        (config, own, where, flip, cuts) => {
          // The configuration comes whole; a unit that lost its configuration is another matter. The stream goes on for longer than the bound on
          // size, which comes from the configuration: a false start is given up while frames still come.
          const size = dataFrameBytes(config);
          const bound = Math.max(size, 2 * wireOf(config, 0)[0]!.length, 1024);
          const [first, ...frames] = wireOf(config, 8 + Math.ceil(bound / size));
          const data = Buffer.concat(frames);
          const at = own * size + (where % size);
          data[at] = data[at]! ^ flip;
          const { slots } = read(cut(Buffer.concat([first!, data]), cuts));
          expect(slots).toEqual(frames.map((_, n) => n).filter((n) => n !== own));
        },
      ),
      { seed: 13, numRuns: 300 },
    );
  });

  it("any bytes are survived, also amid a stream and with a good CRC around them", () => {
    const framed = fc
      .tuple(fc.uint8Array({ minLength: 12, maxLength: 300 }), fc.constantFrom(0x01, 0x21, 0x31, 0x51, 0x11))
      .map(([body, type]) => {
        const frame = Buffer.concat([Buffer.from([0xaa, type, 0, 0, 0, 7]), body]);
        frame.writeUInt16BE(frame.length, 2);
        frame.writeUInt16BE(crcCcitt(frame, 0, frame.length - 2), frame.length - 2);
        return frame;
      });
    fc.assert(
      fc.property(fc.array(fc.oneof(framed, fc.uint8Array({ maxLength: 100 })), { maxLength: 12 }), (pieces) => {
        expect(() => read(pieces)).not.toThrow();
      }),
      { seed: 14, numRuns: 500 },
    );
  });

  it("a configuration that was tampered with is refused by its kind of error only, or makes sense", () => {
    fc.assert(
      fc.property(stream, fc.array(fc.tuple(fc.nat(), fc.nat(255)), { minLength: 1, maxLength: 6 }), (config, changes) => {
        const frame = encodeConfig(config, "configuration-2", SECOND_US);
        for (const [at, value] of changes) frame[14 + (at % (frame.length - 16))] = value;
        try {
          for (const u of decodeConfig(frame).units) expect(u.phasors.length).toBeLessThan(frame.length);
        } catch (error) {
          expect(error).toBeInstanceOf(BadConfiguration);
        }
      }),
      { seed: 15, numRuns: 500 },
    );
  });

  it("counts what it refuses, each under its own code", () => {
    const config: StreamConfig = fc.sample(stream, { seed: 16, numRuns: 1 })[0]!;
    const [first, ...data] = wireOf(config, 4);
    const broken = Buffer.from(first!);
    broken.writeUInt16BE(0, 18); // no units
    broken.writeUInt16BE(crcCcitt(broken, 0, broken.length - 2), broken.length - 2);
    const other = encodeConfig({ ...config, idCode: 8 }, "configuration-2", SECOND_US);
    const unlike = encodeData({ ...config, units: [...config.units, config.units[0]!] }, SECOND_US, [
      ...config.units.map((u) => ({ stat: 0, phasors: u.phasors.flatMap(() => [0, 0]), frequencyHz: 50, rocofHzPerS: 0 })),
      { stat: 0, phasors: config.units[0]!.phasors.flatMap(() => [0, 0]), frequencyHz: 50, rocofHzPerS: 0 },
    ]);
    const { reader } = read([data[0]!, broken, other, first!, data[0]!, data[1]!, data[1]!, unlike, data[3]!, data[2]!]);
    expect(Object.fromEntries(Object.entries(reader.defects).filter(([, count]) => count > 0))).toEqual({
      "no-configuration-yet": 1,
      "bad-configuration": 1,
      "wrong-id-code": 1,
      duplicate: 1,
      "size-unlike-configuration": 1,
    });
    expect(reader).toMatchObject({ frames: 4, missingFrames: 0 });
  });
});
