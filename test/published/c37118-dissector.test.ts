/**
 * Frames that our codec wrote, read by an independent program: tshark's dissector for synchrophasor frames (Debian package tshark; its field names are
 * those of `tshark -G fields`). Each frame travels as one UDP datagram to port 4712 in a capture that this test writes by hand.
 */
import { execFileSync } from "node:child_process";
import { mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { afterAll, describe, expect, it } from "vitest";
import {
  decodeRowInto,
  encodeCommand,
  encodeConfig,
  encodeConfig3,
  encodeData,
  encodeHeader,
  planOf,
  type StreamConfig,
  type UnitConfig,
} from "../../ingest/index.ts";

const folder = mkdtempSync(join(tmpdir(), "spanmark-dissector-"));
afterAll(() => rmSync(folder, { recursive: true }));
const TIME_US = 1_772_590_447e6 + 250_000;

/** Classic pcap, Ethernet, IPv4, UDP; checksums left at zero, which the dissector accepts. */
function capture(frames: readonly Buffer[]): Buffer {
  const head = Buffer.alloc(24);
  head.writeUInt32LE(0xa1b2c3d4, 0);
  head.writeUInt16LE(2, 4);
  head.writeUInt16LE(4, 6);
  head.writeUInt32LE(65_535, 16);
  head.writeUInt32LE(1, 20);
  return Buffer.concat([
    head,
    ...frames.flatMap((frame, k) => {
      const packet = Buffer.alloc(14 + 20 + 8 + frame.length);
      packet.writeUInt16BE(0x0800, 12);
      packet[14] = 0x45;
      packet.writeUInt16BE(28 + frame.length, 16);
      packet[22] = 64;
      packet[23] = 17;
      packet.writeUInt32BE(0x7f000001, 26);
      packet.writeUInt32BE(0x7f000001, 30);
      packet.writeUInt16BE(4712, 34);
      packet.writeUInt16BE(4712, 36);
      packet.writeUInt16BE(8 + frame.length, 38);
      frame.copy(packet, 42);
      const record = Buffer.alloc(16);
      record.writeUInt32LE(1_772_590_447, 0);
      record.writeUInt32LE(k * 1000, 4);
      record.writeUInt32LE(packet.length, 8);
      record.writeUInt32LE(packet.length, 12);
      return [record, packet];
    }),
  ]);
}

function dissected(name: string, frames: readonly Buffer[]): string {
  const path = join(folder, `${name}.pcap`);
  writeFileSync(path, capture(frames));
  try {
    return execFileSync("tshark", ["-r", path, "-d", "udp.port==4712,synphasor", "-V", "-O", "synphasor"], {
      encoding: "utf8",
      stdio: ["ignore", "pipe", "pipe"],
    });
  } catch (cause) {
    throw new Error("tshark could not be run: on Debian, apt-get install tshark (npm test does so as root)", { cause });
  }
}

const unit = (over: Partial<UnitConfig>): UnitConfig => ({
  name: "Brack",
  idCode: 241,
  phasorsArePolar: false,
  phasorsAreFloat: true,
  analogsAreFloat: true,
  frequencyIsFloat: true,
  phasors: [
    { name: "VA", kind: "voltage", perBit: 10 },
    { name: "IA", kind: "current", perBit: 0.5 },
  ],
  analogs: [{ name: "MW", kind: "rms", scale: 1 }],
  digitals: [{ names: Array.from({ length: 16 }, (_, k) => `D${k}`), normal: 0, valid: 3 }],
  nominalHz: 60,
  configurationCount: 5,
  ...over,
});
const stream = (...units: UnitConfig[]): StreamConfig => ({ idCode: 241, timeBase: 1_000_000, reportingRateHz: 60, units });
const numbers = (text: string, pattern: RegExp) => [...text.matchAll(pattern)].map((m) => m.slice(1).map(Number));

describe("an independent dissector reads what our codec wrote", () => {
  it("configuration 2 of two unlike units", () => {
    const config = stream(
      unit({}),
      unit({ name: "Tolva", idCode: 242, phasorsArePolar: true, phasorsAreFloat: false, frequencyIsFloat: false, nominalHz: 50 }),
    );
    const text = dissected("configuration", [encodeConfig(config, "configuration-2", TIME_US)]);
    expect(text).toMatch(/Checksum: 0x[0-9a-f]+ \[correct\]/);
    for (const words of ["Brack", "Tolva", "VA", "IA", "MW"]) expect(text).toContain(words);
    expect(text).toMatch(/Resolution of fractional second time stamp: 1000000/);
    expect(text).toMatch(/Number of PMU blocks included in the frame: 2/);
    expect(text).toMatch(/Rate of transmission: 60/);
    expect(text).toMatch(/Nominal line frequency: 60Hz/);
    expect(text).toMatch(/Nominal line frequency: 50Hz/);
    expect(text).not.toMatch(/Malformed/i);
  });

  for (const phasorsArePolar of [false, true]) {
    for (const phasorsAreFloat of [false, true]) {
      for (const frequencyIsFloat of [false, true]) {
        const name = `${phasorsArePolar ? "polar" : "rectangular"}-${phasorsAreFloat ? "float" : "int"}-${frequencyIsFloat ? "float" : "int"}`;
        it(`data, ${name}: the same phasors, frequency and status`, () => {
          const config = stream(unit({ phasorsArePolar, phasorsAreFloat, frequencyIsFloat }));
          const phasors = [132_400, -4_210, -388.5, 120];
          const data = { stat: 0x2800, phasors, frequencyHz: 59.964, rocofHzPerS: -0.25, analogs: [88.5], digitals: [2] };
          const text = dissected(name, [encodeConfig(config, "configuration-2", TIME_US), encodeData(config, TIME_US, [data])]);
          expect(text).not.toMatch(/Malformed/i);
          const shown = numbers(text, /Phasor #\d+: "[^"]*", +(-?[\d.]+)[VA] ∠ *(-?[\d.]+)°/g);
          expect(shown.length).toBe(2);
          for (const k of [0, 1]) {
            const [re, im] = [phasors[2 * k]!, phasors[2 * k + 1]!];
            const size = Math.hypot(re, im);
            const perBit = [10, 0.5][k]!;
            expect(Math.abs(shown[k]![0]! - size)).toBeLessThan(phasorsAreFloat ? size * 1e-6 + 0.01 : perBit);
            expect(Math.abs(shown[k]![1]! - (Math.atan2(im, re) * 180) / Math.PI)).toBeLessThan(
              phasorsAreFloat ? 0.01 : 0.01 + (perBit / size) * 57.3,
            );
          }
          const [frequency] = numbers(
            text,
            frequencyIsFloat ? /Actual frequency value: ([\d.]+)/g : /actual frequency: ([\d.]+)Hz/g,
          )[0]!;
          expect(Math.abs(frequency! - 59.964)).toBeLessThan(0.001);
          expect(numbers(text, /Rate of change of frequency: (-?[\d.]+)/g)).toEqual([[-0.25]]);
          expect(numbers(text, /Analog value #1: "MW +", ([\d.]+)/g)).toEqual([[88.5]]);
          expect(text).toContain("Digital status word #1: 0x0002");
          expect(text).toContain("Time synchronized: Synchronization lost");
          expect(text).toContain("Trigger detected: Trigger detected");
          expect(text).toContain("Fraction of second (raw): 250000");
        });
      }
    }
  }

  it("data of four unlike units in one frame, each in its own format, at its own nominal frequency", () => {
    const formats = [
      { phasorsArePolar: false, phasorsAreFloat: true, frequencyIsFloat: true, analogsAreFloat: true },
      { phasorsArePolar: true, phasorsAreFloat: true, frequencyIsFloat: false, analogsAreFloat: false },
      { phasorsArePolar: false, phasorsAreFloat: false, frequencyIsFloat: true, analogsAreFloat: false },
      { phasorsArePolar: true, phasorsAreFloat: false, frequencyIsFloat: false, analogsAreFloat: true },
    ];
    const config = stream(
      ...formats.map((format, k) =>
        unit({
          ...format,
          name: `Unit ${k}`,
          idCode: 300 + k,
          nominalHz: k % 2 ? 50 : 60,
          phasors: Array.from({ length: 1 + k }, (_, n) => ({
            name: `P${k}${n}`,
            kind: n % 2 ? "current" : "voltage",
            perBit: 2,
          })),
        }),
      ),
    );
    // Whole numbers of bits, so that no format rounds what is sent: 3-4-5 triangles in steps of perBit.
    const sent = config.units.map((u, k) => ({
      stat: k,
      phasors: u.phasors.flatMap((_, n) => [600 * (k + 1), -800 * (n + 1) * (k + 1)]),
      frequencyHz: u.nominalHz + (k + 1) / 8,
      rocofHzPerS: (k - 1) / 4,
      analogs: [-1500 - k],
      digitals: [0x8001 + k],
    }));
    const text = dissected("many", [encodeConfig(config, "configuration-2", TIME_US), encodeData(config, TIME_US, sent)]);
    expect(text).not.toMatch(/Malformed/i);
    const data = text.slice(text.indexOf("\nFrame 2:"));
    const shown = numbers(data, /Phasor #\d+: "[^"]*", +(-?[\d.]+)[VA] ∠ *(-?[\d.]+)°/g);
    const polar = sent.flatMap((u) =>
      u.phasors.flatMap((re, n) =>
        n % 2 ? [] : [[Math.hypot(re, u.phasors[n + 1]!), Math.atan2(u.phasors[n + 1]!, re)] as const],
      ),
    );
    expect(shown.length).toBe(1 + 2 + 3 + 4);
    for (const [n, [size, angle]] of polar.entries()) {
      // Half a bit of an integer magnitude; 5e-5 rad of an integer angle; two decimals shown of either.
      expect(Math.abs(shown[n]![0]! - size)).toBeLessThanOrEqual(1.01);
      expect(Math.abs(shown[n]![1]! - (angle * 180) / Math.PI)).toBeLessThanOrEqual(0.0029 + 0.01);
    }
    expect(numbers(data, /(?:Actual frequency value|actual frequency): ([\d.]+)/g).flat()).toEqual(
      sent.map((u) => u.frequencyHz),
    );
    expect(numbers(data, /Rate of change of frequency: (-?[\d.]+)/g).flat()).toEqual(sent.map((u) => u.rocofHzPerS));
    expect(numbers(data, /Analog value #1: "MW +", (-?[\d.]+)/g).flat()).toEqual(sent.map((u) => u.analogs[0]));
    for (const u of sent) expect(data).toContain(`Digital status word #1: 0x${u.digitals[0]!.toString(16)}`);
  });

  it("configuration 1, a header, and commands", () => {
    const text = dissected("others", [
      encodeConfig(stream(unit({})), "configuration-1", TIME_US),
      encodeHeader(241, "Brack, bay 7", TIME_US),
      encodeCommand(241, "data-off", TIME_US),
      encodeCommand(241, "data-on", TIME_US),
      encodeCommand(241, "send-configuration-2", TIME_US),
    ]);
    expect(text).not.toMatch(/Malformed/i);
    expect(text.match(/Checksum: 0x[0-9a-f]+ \[correct\]/g)?.length).toBe(5);
    expect(text).toMatch(/Configuration Frame 1/);
    expect(text).toMatch(/Header Frame/);
    expect(text).toMatch(/Data transmission off/i);
    expect(text).toMatch(/Data transmission on/i);
    expect(text).toMatch(/Send CFG-2 frame/i);
  });

  it("configuration 3 of two units, and data read by its scales", () => {
    const site = {
      globalId: "00112233445566778899aabbccddeeff",
      latitudeDeg: 57.25,
      longitudeDeg: -4.5,
      elevationM: 150,
      serviceClass: "P" as const,
      windowUs: 33_333,
      groupDelayUs: 16_667,
    };
    const config = stream(
      unit({
        name: "Brack, the bay of the line to Tolva",
        phasorsArePolar: true,
        phasorsAreFloat: false,
        phasors: [
          { name: "Voltage of phase A", kind: "voltage", component: "A", perBit: 10 },
          { name: "Current of phase A", kind: "current", component: "A", perBit: 0.5, angleRad: 0.5 },
        ],
        site,
      }),
      unit({
        name: "Tolva",
        idCode: 242,
        nominalHz: 50,
        phasors: [{ name: "Current of phase B", kind: "current", component: "B", perBit: 1, angleRad: -0.25 }],
        analogs: [{ name: "MW", kind: "rms", scale: 2, offset: -1 }],
      }),
    );
    const data = { stat: 0, phasors: [1200, 0, 30, 40], frequencyHz: 60, rocofHzPerS: 0, analogs: [1], digitals: [0] };
    const frame = encodeData(config, TIME_US, [data, { ...data, phasors: [30, 40], frequencyHz: 50 }], 0x26);
    const text = dissected("configuration3", [
      ...encodeConfig3(config, TIME_US),
      frame,
      encodeCommand(241, "send-configuration-3", TIME_US),
      encodeCommand(241, "extended", TIME_US, Buffer.from("c0ffee00", "hex")),
    ]);
    expect(text).not.toMatch(/Malformed/i);
    expect(text.match(/Checksum: 0x[0-9a-f]+ \[correct\]/g)?.length).toBe(4);
    for (const words of [
      "Added in IEEE Std C37.118.2-2011",
      "Station name: Brack, the bay of the line to Tolva",
      "00 11 22 33 44 55 66 77 88 99 aa bb cc dd ee ff",
      "Phasor Data flags: Voltage, Phase A",
      "Phasor Data flags: Current, Phase B",
      "Phasor scale factor: 0.5",
      "Phasor angle offset: -0.25",
      "Analog offset: -1",
      "PMU Latitude: 57.25",
      "PMU Longitude: -4.5",
      "PMU Elevation: 150",
      "Unspecified Location",
      "Service class: Protection",
      "PM window length: 33333",
      "PM group delay: 16667",
      "Rate of transmission: 60",
      "Leap second occurred: True",
      "Message Time Quality indicator code: Clock unlocked, time within 10^-4 s (0x6)",
      "Command: send CFG-3 frame",
      "Extended frame data: c0ffee00",
    ])
      expect(text).toContain(words);
    const plan = planOf(config);
    const row = {
      phasors: new Float64Array(6),
      frequencyHz: new Float64Array(2),
      rocofHzPerS: new Float64Array(2),
      stat: new Uint16Array(2),
    };
    decodeRowInto(row, 0, plan, new DataView(frame.buffer, frame.byteOffset, frame.length), 0);
    const shown = numbers(text, /Phasor #\d+: "[^"]*", +(-?[\d.]+)[VA] ∠ *(-?[\d.]+)°/g);
    expect(shown.length).toBe(3);
    for (const [k, [size, angle]] of shown.entries()) {
      expect(Math.hypot(row.phasors[2 * k]!, row.phasors[2 * k + 1]!)).toBeCloseTo(size!, 2);
      expect((Math.atan2(row.phasors[2 * k + 1]!, row.phasors[2 * k]!) * 180) / Math.PI).toBeCloseTo(angle!, 2);
    }
  });
});
