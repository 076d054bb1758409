/** Configuration frame 3 and what comes with it. The first frame is written here byte by byte, from the standard's tables, without our writer. */
import fc from "fast-check";
import { describe, expect, it } from "vitest";
import {
  BadConfiguration,
  Config3Assembler,
  commandExtension,
  crcCcitt,
  decodeCommand,
  decodeConfig3,
  encodeCommand,
  encodeConfig,
  encodeConfig3,
  encodeData,
  type StreamConfig,
} from "../../ingest/index.ts";
import { StreamReader } from "../../ingest/stream-reader.ts";
import { streamOf } from "./unit-peer.ts";

const TIME_US = 1_772_590_447e6;
const bytes = (hex: string) => Buffer.from(hex.replaceAll(/\s/g, ""), "hex");
const letters = (text: string) => `${text.length.toString(16).padStart(2, "0")}${Buffer.from(text).toString("hex")}`;

/** Size, time and CRC put around content; the CRC bit by bit, not by our tables. */
function framed(second: string, idCode: number, body: Buffer): Buffer {
  const frame = Buffer.concat([bytes(`aa${second}`), Buffer.alloc(12), body, Buffer.alloc(2)]);
  frame.writeUInt16BE(frame.length, 2);
  frame.writeUInt16BE(idCode, 4);
  frame.writeUInt32BE(1_772_590_447, 6);
  let crc = 0xffff;
  for (const byte of frame.subarray(0, -2))
    for (let bit = 7; bit >= 0; bit--) crc = ((crc << 1) ^ ((crc >> 15) ^ ((byte >> bit) & 1) ? 0x1021 : 0)) & 0xffff;
  frame.writeUInt16BE(crc, frame.length - 2);
  return frame;
}

const CONTENT = bytes(`
  000f4240 0001
  ${letters("Brack 230 kV, bay seven")} 00f1 00112233445566778899aabbccddeeff
  0000 0002 0001 0001
  ${letters("Brack line Tolva voltage")} ${letters("I")} ${letters("Load")}
  ${Array.from({ length: 16 }, (_, k) => letters(`breaker ${k}`)).join("")}
  0001 0100 41200000 00000000
  00c0 0c00 3f000000 3fc90fdb
  40000000 bf800000
  0004 00ff
  42480000 c1200000 43160000
  4d 0000c350 00004e20
  0000 0007
  003c`);

const whole = (frames: readonly Buffer[]) => {
  const assembler = new Config3Assembler();
  return frames.map((f) => assembler.take(f, 0, f.length)).at(-1);
};
const reading = (idCode = 241) => {
  const rows: number[] = [];
  const reader = new StreamReader({ id: "brack", idCode, address: "tcp://127.0.0.1:1", reportingRateHz: 60 } as never, {
    onConfiguration: () => {},
    onRow: (slot) => rows.push(slot),
    onDefect: () => {},
  });
  return { reader, rows };
};

describe("configuration frame 3", () => {
  it("is read from bytes written by hand", () => {
    const frame = framed("52", 241, Buffer.concat([bytes("0000"), CONTENT]));
    expect(crcCcitt(frame, 0, frame.length - 2)).toBe(frame.readUInt16BE(frame.length - 2));
    const config = decodeConfig3(whole([frame])!, 241);
    expect(config).toMatchObject({ idCode: 241, timeBase: 1_000_000, reportingRateHz: 60 });
    const [unit] = config.units;
    expect(unit).toMatchObject({
      name: "Brack 230 kV, bay seven",
      idCode: 241,
      phasorsArePolar: false,
      phasorsAreFloat: false,
      analogsAreFloat: false,
      frequencyIsFloat: false,
      nominalHz: 60,
      configurationCount: 7,
      phasors: [
        { name: "Brack line Tolva voltage", kind: "voltage", component: "positive", changes: 1, perBit: 10, angleRad: 0 },
        { name: "I", kind: "current", component: "A", changes: 0xc0, perBit: 0.5 },
      ],
      analogs: [{ name: "Load", scale: 2, offset: -1 }],
      site: {
        globalId: "00112233445566778899aabbccddeeff",
        latitudeDeg: 50,
        longitudeDeg: -10,
        elevationM: 150,
        serviceClass: "M",
        windowUs: 50_000,
        groupDelayUs: 20_000,
      },
    });
    expect(unit!.phasors[1]!.angleRad).toBeCloseTo(Math.PI / 2, 6);
    expect(unit!.digitals[0]).toMatchObject({ normal: 4, valid: 255 });
    expect(unit!.digitals[0]!.names[15]).toBe("breaker 15");
  });

  it("a data frame behind it becomes a row, its angles corrected", () => {
    const { reader, rows } = reading();
    reader.push(framed("52", 241, Buffer.concat([bytes("0000"), CONTENT])));
    // STAT, 100 + 0j and 6 + 8j in their steps, 10 mHz above, ROCOF 0, analog, digital
    reader.push(framed("01", 241, bytes("0000 0064 0000 0006 0008 000a 0000 0001 0000")));
    expect(rows.length).toBe(1);
    const ring = reader.ring!;
    const at = ring.rowOf(rows[0]!) * 4;
    expect(ring.phasors[at]).toBe(1000);
    expect(ring.phasors[at + 2]).toBeCloseTo(4, 5);
    expect(ring.phasors[at + 3]).toBeCloseTo(-3, 5);
    expect(ring.frequencyHz[ring.rowOf(rows[0]!)]).toBeCloseTo(60.01, 9);
  });

  it("in pieces: cut anywhere, put together; a missing piece is a defect, and the next set is read", () => {
    const config = decodeConfig3(CONTENT, 241);
    for (const largest of [19, 40, 200, 65_535]) {
      const frames = encodeConfig3(config, TIME_US, largest);
      expect(frames.length).toBe(Math.ceil(CONTENT.length / (largest - 18)));
      expect(frames.every((f) => f.length <= largest)).toBe(true);
      expect(whole(frames)!.equals(CONTENT)).toBe(true);
    }
    const frames = encodeConfig3(config, TIME_US, 100);
    const { reader } = reading();
    for (const frame of [frames[0]!, ...frames.slice(2)]) reader.push(frame);
    expect(reader.config).toBeUndefined();
    expect(reader.defects["bad-configuration"]).toBeGreaterThan(0);
    for (const frame of frames) reader.push(frame);
    expect(reader.config).toEqual(config);
  });

  it("a stream that sends both configurations keeps to the first", () => {
    const config = streamOf(241);
    const { reader } = reading();
    reader.push(encodeConfig(config, "configuration-2", TIME_US));
    const { ring } = reader;
    for (const frame of encodeConfig3(config, TIME_US)) reader.push(frame);
    expect(reader.ring).toBe(ring);
  });

  it("any content cut short or damaged is refused in words, or read; nothing else happens", () => {
    for (let end = 0; end < CONTENT.length; end++)
      expect(() => decodeConfig3(CONTENT.subarray(0, end), 241)).toThrow(BadConfiguration);
    fc.assert(
      fc.property(fc.nat(CONTENT.length - 1), fc.nat(255), (at, byte) => {
        const damaged = Buffer.from(CONTENT);
        damaged[at] = byte;
        try {
          expect(decodeConfig3(damaged, 241).units.length).toBeGreaterThan(0);
        } catch (error) {
          expect(error).toBeInstanceOf(BadConfiguration);
        }
      }),
      { seed: 3, numRuns: 2000 },
    );
  });
});

it("an extended command carries its bytes; a plain one none", () => {
  const frame = encodeCommand(7, "extended", TIME_US, bytes("c0ffee"));
  expect(decodeCommand(frame)).toBe("extended");
  expect(Buffer.from(commandExtension(frame)).toString("hex")).toBe("c0ffee");
  expect(commandExtension(encodeCommand(7, "data-on", TIME_US)).length).toBe(0);
  expect(() => encodeCommand(7, "data-on", TIME_US, bytes("00"))).toThrow(RangeError);
});

it("one frame in ten seconds: its rows stand at tens of seconds", () => {
  const config = { ...streamOf(241), reportingRateHz: 0.1 } satisfies StreamConfig;
  const { reader, rows } = reading();
  reader.push(encodeConfig(config, "configuration-2", TIME_US));
  expect(reader.config!.reportingRateHz).toBe(0.1);
  const data = [{ stat: 0, phasors: new Float64Array(12), frequencyHz: 60, rocofHzPerS: 0 }];
  for (const s of [0, 10, 30]) reader.push(encodeData(config, 1_772_590_440e6 + s * 1e6, data));
  expect(rows.map((slot) => slot - rows[0]!)).toEqual([0, 1, 3]);
  expect(reader.missingFrames).toBe(1);
});

it("a configuration that would take too much memory, or claims an impossible rate, is refused before any is taken", () => {
  const { reader } = reading();
  const channels = Array.from({ length: 3000 }, (_, k) => ({ name: "", kind: "voltage" as const, perBit: 1 + k }));
  const wide = streamOf(241, [], 240);
  const units = [{ ...wide.units[0]!, phasorsAreFloat: false, phasors: channels }];
  reader.push(encodeConfig({ ...wide, units, reportingRateHz: 960 }, "configuration-2", TIME_US));
  reader.push(encodeConfig({ ...streamOf(241), reportingRateHz: 32_767 }, "configuration-2", TIME_US));
  expect(reader.config).toBeUndefined();
  expect(reader.defects["bad-configuration"]).toBe(2);
});
