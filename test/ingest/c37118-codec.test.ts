/** The first bytes of each frame type are worked out by hand from IEEE C37.118.2-2011 (from memory), so that reader and writer cannot agree on a mistake. */
import { describe, expect, it } from "vitest";
import {
  BadConfiguration,
  crcCcitt,
  dataFrameBytes,
  decodeCommand,
  decodeConfig,
  decodeHeader,
  encodeCommand,
  encodeConfig,
  encodeData,
  encodeHeader,
  type StreamConfig,
  statWord,
  type UnitConfig,
} from "../../ingest/index.ts";
import { WritableRing } from "../../ingest/ring.ts";

const TIME_US = 1_149_580_800e6 + 16_817; // 2006-06-06 08:00:00.016817 UTC
const unit = (over: Partial<UnitConfig> = {}): UnitConfig => ({
  name: "Station A",
  idCode: 7734,
  phasorsArePolar: false,
  phasorsAreFloat: false,
  analogsAreFloat: true,
  frequencyIsFloat: false,
  phasors: [
    { name: "VA", kind: "voltage", perBit: 9.15527 },
    { name: "I1", kind: "current", perBit: 0.45776 },
  ],
  analogs: [{ name: "ANALOG1", kind: "instantaneous", scale: 1 }],
  digitals: [{ names: Array.from({ length: 16 }, (_, k) => `BREAKER ${k + 1} STATUS`.slice(0, 16)), normal: 0, valid: 0xffff }],
  nominalHz: 60,
  configurationCount: 22,
  ...over,
});
const stream = (...units: UnitConfig[]): StreamConfig => ({ idCode: 7734, timeBase: 1_000_000, units, reportingRateHz: 30 });
const hex = (bytes: Uint8Array, from: number, to: number) => Buffer.from(bytes.subarray(from, to)).toString("hex");

describe("bytes on the wire", () => {
  it("a command: sync aa41, 18 bytes, IDCODE, SOC, FRACSEC, the command's number", () => {
    const frame = encodeCommand(7734, "data-on", 1_149_591_600e6 + 770_000);
    expect(hex(frame, 0, 16)).toBe(`aa410012${"1e36"}${"44856030"}${"000bbfd0"}${"0002"}`);
    expect(frame.length).toBe(18);
    expect(decodeCommand(frame)).toBe("data-on");
  });
  it("a header: sync aa11 and text", () => {
    const frame = encodeHeader(7734, "Hello", TIME_US);
    expect(hex(frame, 0, 6)).toBe("aa1100151e36");
    expect(decodeHeader(frame)).toBe("Hello");
  });
  it("configuration 2: sync aa31, TIME_BASE, units, names padded to 16, FORMAT, counts, PHUNIT, FNOM, DATA_RATE", () => {
    const config = stream(unit());
    const frame = encodeConfig(config, "configuration-2", TIME_US);
    expect(hex(frame, 0, 2)).toBe("aa31");
    expect(frame.readUInt16BE(2)).toBe(frame.length);
    expect(hex(frame, 14, 20)).toBe(`000f4240${"0001"}`);
    expect(frame.toString("latin1", 20, 36)).toBe("Station A       ");
    // FORMAT 4: rectangular int16 phasors, float analogs, int16 frequency; 2 phasors, 1 analog, 1 digital word.
    expect(hex(frame, 36, 46)).toBe(`1e36${"0004"}${"0002"}${"0001"}${"0001"}`);
    expect(frame.toString("latin1", 46, 62)).toBe("VA              ");
    const units = 46 + 19 * 16;
    // 9.15527 V a bit is 915527 in units of 1e-5, 0.45776 A a bit 45776 with type 1.
    expect(hex(frame, units, units + 8)).toBe(`000df847${"0100b2d0"}`);
    expect(hex(frame, frame.length - 8, frame.length - 2)).toBe(`0000${"0016"}${"001e"}`);
    expect(crcCcitt(frame, 0, frame.length - 2)).toBe(frame.readUInt16BE(frame.length - 2));
    expect(hex(encodeConfig(config, "configuration-1", TIME_US), 0, 2)).toBe("aa21");
  });
  it("data: sync aa01, STAT, phasors, FREQ in mHz off nominal, DFREQ in hundredths, analogs, digitals", () => {
    const config = stream(unit());
    const phasors = [14_635 * 9.15527, 0, 1092 * 0.45776, -500 * 0.45776];
    const frame = encodeData(config, TIME_US, [
      { stat: 0x2010, phasors, frequencyHz: 62.5, rocofHzPerS: -1.25, analogs: [100], digitals: [0x3c12] },
    ]);
    expect(frame.length).toBe(dataFrameBytes(config));
    expect(hex(frame, 0, 14)).toBe(`aa01${"0024"}${"1e36"}${"44853600"}${"000041b1"}`);
    expect(hex(frame, 14, 34)).toBe(`2010${"392b0000"}${"0444fe0c"}${"09c4"}${"ff83"}${"42c80000"}${"3c12"}`);
  });
});

describe("configuration frames", () => {
  it.each([30, 60, 1, 0.5])("come back as they were written, at %d frames/s", (reportingRateHz) => {
    const config = {
      ...stream(unit(), unit({ name: "Other", idCode: 12, phasorsArePolar: true, phasorsAreFloat: true, nominalHz: 50 })),
      reportingRateHz,
    };
    const back = decodeConfig(encodeConfig(config, "configuration-2", TIME_US));
    expect(back.reportingRateHz).toBeCloseTo(reportingRateHz, 12);
    expect(back.units.map((u) => ({ ...u, phasors: u.phasors.map((p) => p.name) }))).toEqual(
      config.units.map((u) => ({ ...u, phasors: u.phasors.map((p) => p.name) })),
    );
    expect(back.units[0]!.phasors[0]!.perBit).toBeCloseTo(9.15527, 9);
  });
  it("whose counts do not fit their size are refused in words, before memory is taken", () => {
    const frame = encodeConfig(stream(unit()), "configuration-2", TIME_US);
    frame.writeUInt16BE(60_000, 40); // phasors
    expect(() => decodeConfig(frame)).toThrow(BadConfiguration);
    expect(() => decodeConfig(frame)).toThrow(/the channels of unit "Station A" needs \d+ bytes/);
    const none = encodeConfig({ ...stream(unit()), timeBase: 0 }, "configuration-2", 0);
    expect(() => decodeConfig(none)).toThrow(/TIME_BASE is 0/);
  });
});

describe("data frames in every number format", () => {
  for (const phasorsArePolar of [false, true]) {
    for (const phasorsAreFloat of [false, true]) {
      for (const frequencyIsFloat of [false, true]) {
        it(`${phasorsArePolar ? "polar" : "rectangular"}, ${phasorsAreFloat ? "float32" : "int16"} phasors, ${frequencyIsFloat ? "float32" : "int16"} frequency`, () => {
          const config = stream(
            unit({ phasorsArePolar, phasorsAreFloat, frequencyIsFloat }),
            unit({ idCode: 8, phasorsAreFloat: true, digitals: [] }),
          );
          const phasors = [120_000.5, -31_000.25, -402.75, 88.5];
          const frame = encodeData(config, TIME_US, [
            { stat: 3, phasors, frequencyHz: 59.987, rocofHzPerS: 0.13 },
            { stat: 0x8000, phasors: [1, 2, 3, 4], frequencyHz: 60, rocofHzPerS: 0 },
          ]);
          const ring = new WritableRing("f", config);
          expect(ring.put(new DataView(frame.buffer, frame.byteOffset, frame.length), 0, undefined)).toBe("new");
          const row = ring.rowOf(ring.newestSlot);
          expect(ring.timeUs[row]).toBe(TIME_US);
          for (let k = 0; k < 4; k++) {
            // float32 keeps 24 bits; integers are good to half a bit, polar ones also to half of 1e-4 rad of the magnitude.
            const perBit = k < 2 ? 9.15527 : 0.45776;
            const size = k < 2 ? 124_000 : 413;
            const tolerance = phasorsAreFloat ? size * 2e-7 : perBit * 0.75 + (phasorsArePolar ? size * 5e-5 : 0);
            expect(Math.abs(ring.phasors[row * 8 + k]! - phasors[k]!)).toBeLessThanOrEqual(tolerance);
          }
          expect([...ring.phasors.subarray(row * 8 + 4, row * 8 + 8)]).toEqual([1, 2, 3, 4]);
          expect(Math.abs(ring.frequencyHz[row * 2]! - 59.987)).toBeLessThan(frequencyIsFloat ? 4e-6 : 5e-4);
          expect(Math.abs(ring.rocofHzPerS[row * 2]! - 0.13)).toBeLessThan(0.005);
          expect([...ring.stat.subarray(row * 2, row * 2 + 2)]).toEqual([3, 0x8000]);
        });
      }
    }
  }
  it.each([
    [false, false],
    [true, false],
    [false, true],
  ])("absent values stay absent (polar %s, float %s)", (phasorsArePolar, phasorsAreFloat) => {
    const config = stream(unit({ phasorsArePolar, phasorsAreFloat }));
    const frame = encodeData(config, TIME_US, [
      { stat: 0, phasors: [Number.NaN, Number.NaN, 10, 10], frequencyHz: Number.NaN, rocofHzPerS: Number.NaN },
    ]);
    const ring = new WritableRing("f", config);
    ring.put(new DataView(frame.buffer, frame.byteOffset, frame.length), 0, undefined);
    const row = ring.rowOf(ring.newestSlot);
    expect(ring.phasors[row * 4]).toBeNaN();
    expect(ring.phasors[row * 4 + 2]).toBeCloseTo(10, 0);
    expect(ring.frequencyHz[row]).toBeNaN();
  });
});

it("STAT: each part of the word where the standard has it", () => {
  expect(statWord.read(0b10_1_0_1_1_0_011_10_0101)).toEqual({
    dataError: 2,
    notSynchronised: 1,
    sortedByArrival: 0,
    trigger: 1,
    configurationChange: 1,
    modified: 0,
    timeQuality: 3,
    unlockedTime: 2,
    triggerReason: 5,
  });
  expect(statWord.write({ notSynchronised: 1, triggerReason: 5 })).toBe(0x2005);
});
