/** A leap second in the stream: SOC bears the same number for two seconds, the quality byte says which is which. */
import { describe, expect, it } from "vitest";
import { encodeConfig, encodeData, timeQualityOf } from "../../ingest/index.ts";
import { StreamReader } from "../../ingest/stream-reader.ts";
import { streamOf } from "./unit-peer.ts";

const config = streamOf(241, undefined, 10);
/** Midnight UTC after 30 June 2030. */
const MIDNIGHT_S = 1_909_094_400;
const PENDING = 0x10;
const OCCURRED = 0x20;

/** Ten frames of one second, each marked in its frequency with the second of true time it was measured in. */
const second = (socS: number, quality: number, trueS: number) =>
  Array.from({ length: 10 }, (_, k) =>
    encodeData(
      config,
      socS * 1e6 + k * 100_000,
      [{ stat: 0, phasors: new Float64Array(12), frequencyHz: 50 + trueS, rocofHzPerS: 0 }],
      quality,
    ),
  );

function read(frames: readonly Buffer[]) {
  const reader = new StreamReader({ id: "brack", idCode: 241, address: "tcp://127.0.0.1:1", reportingRateHz: 10 } as never, {
    onConfiguration: () => {},
    onRow: () => {},
    onDefect: () => {},
  });
  reader.push(encodeConfig(config, "configuration-2", MIDNIGHT_S * 1e6));
  for (const frame of frames) reader.push(frame);
  const ring = reader.ring!;
  /** [time since midnight in tenths, second of true time, quality] of each row around midnight. */
  const held = Array.from({ length: 40 }, (_, k) => MIDNIGHT_S * 10 - 20 + k).flatMap((slot) => {
    const row = ring.rowOf(slot);
    return row < 0 ? [] : [[slot - MIDNIGHT_S * 10, ring.frequencyHz[row]! - 50, ring.timeQuality[row]!] as const];
  });
  return { reader, held };
}

describe("a leap second", () => {
  const before = [...second(MIDNIGHT_S - 2, PENDING, 0), ...second(MIDNIGHT_S - 1, PENDING, 1)];
  const after = [...second(MIDNIGHT_S, OCCURRED, 3), ...second(MIDNIGHT_S + 1, OCCURRED, 4)];
  for (const [name, leap] of [
    ["bears the number of the second after it", second(MIDNIGHT_S, PENDING, 2)],
    ["bears the number of the second before it", second(MIDNIGHT_S - 1, PENDING, 2)],
  ] as const) {
    it(`${name}: its frames are left out, a gap follows, all other frames stand where UTC puts them`, () => {
      const { reader, held } = read([...before, ...leap, ...after]);
      expect(held.filter(([, trueS]) => trueS === 2)).toEqual([]);
      expect(held.filter(([at]) => at < 0).map(([at, s, q]) => [at, s, q])).toEqual(
        Array.from({ length: 20 }, (_, k) => [k - 20, k < 10 ? 0 : 1, PENDING]),
      );
      // The first frame after is the gap that keeps readers from comparing across.
      expect(held.filter(([at]) => at >= 0).map(([at, s, q]) => [at, s, q])).toEqual(
        Array.from({ length: 19 }, (_, k) => [k + 1, k < 9 ? 3 : 4, OCCURRED]),
      );
      expect(reader.defects["leap-second"]).toBe(11);
      expect(reader.defects.duplicate).toBe(0);
    });
  }

  it("that is only announced changes nothing, and a second left out is a gap", () => {
    expect(read([...before, ...second(MIDNIGHT_S, 0, 2)]).held.length).toBe(30);
    const { held, reader } = read([...second(MIDNIGHT_S - 2, 0x50, 0), ...second(MIDNIGHT_S, 0x60, 1)]);
    expect(held.length).toBe(20);
    expect(reader.defects["leap-second"]).toBe(0);
  });
});

it("the quality byte in words and microseconds", () => {
  expect(timeQualityOf(0)).toEqual({ leapSecond: "none", leapDirection: "added", errorUs: 0 });
  expect(timeQualityOf(0x14)).toMatchObject({ leapSecond: "pending", errorUs: 1 });
  expect(timeQualityOf(0x6b)).toEqual({ leapSecond: "occurred", leapDirection: "deleted", errorUs: 1e7 });
  expect(timeQualityOf(0x01).errorUs).toBe(1e-3);
  expect(timeQualityOf(0x0f).errorUs).toBe(Number.POSITIVE_INFINITY);
});
