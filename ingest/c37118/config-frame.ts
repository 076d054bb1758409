/** Configuration frames 1 and 2: what a stream can send, and what it sends. Source: IEEE C37.118.2-2011, clause 6.4, table 8 (from memory). */
import { timeFields } from "./common-header.ts";
import { bits, fields, u16, u32 } from "./fields.ts";
import { BODY_AT, finishFrame } from "./frame-writer.ts";
import type { AnalogChannel, DigitalWord, PhasorChannel, StreamConfig, UnitConfig } from "./stream-config.ts";

const NAME_BYTES = 16;
const streamStart = fields([
  ["timeBase", u32],
  ["unitCount", u16],
]);
const unitStart = fields([
  ["idCode", u16],
  ["format", u16],
  ["phasorCount", u16],
  ["analogCount", u16],
  ["digitalCount", u16],
]);
const formatBits = bits({ polar: [0, 1], phasorFloat: [1, 1], analogFloat: [2, 1], frequencyFloat: [3, 1] });

type UnitFormat = Pick<UnitConfig, "phasorsArePolar" | "phasorsAreFloat" | "analogsAreFloat" | "frequencyIsFloat">;

/** FORMAT of a unit, the same word in configuration frames 1, 2 and 3. */
export function formatOf(word: number): UnitFormat {
  const format = formatBits.read(word);
  return {
    phasorsArePolar: format.polar === 1,
    phasorsAreFloat: format.phasorFloat === 1,
    analogsAreFloat: format.analogFloat === 1,
    frequencyIsFloat: format.frequencyFloat === 1,
  };
}

export const formatWordOf = (unit: UnitFormat): number =>
  formatBits.write({
    polar: Number(unit.phasorsArePolar),
    phasorFloat: Number(unit.phasorsAreFloat),
    analogFloat: Number(unit.analogsAreFloat),
    frequencyFloat: Number(unit.frequencyIsFloat),
  });

/** FNOM bit 0: set for 50 Hz. */
const NOMINAL_50 = 1;
export const nominalHzOf = (word: number): 50 | 60 => (word & NOMINAL_50 ? 50 : 60);
export const nominalWordOf = (nominalHz: 50 | 60): number => (nominalHz === 50 ? NOMINAL_50 : 0);
/** PHUNIT counts 10⁻⁵ volt or ampere per bit. */
const PER_BIT = 1e-5;
const analogKinds = ["instantaneous", "rms", "peak"] as const;

/** What keeps a configuration frame from being used, in words. */
export class BadConfiguration extends Error {}

/** DATA_RATE: frames per second, or, negative, seconds per frame. */
export const rateOf = (word: number): number => (word >= 0 ? word : -1 / word);
export const rateWordOf = (rateHz: number): number => (rateHz >= 1 ? Math.round(rateHz) : -Math.round(1 / rateHz));

/** @throws BadConfiguration when counts and size do not fit, or a value is out of its range */
export function decodeConfig(frame: Uint8Array, at = 0, size = frame.length): StreamConfig {
  const view = new DataView(frame.buffer, frame.byteOffset + at, size);
  const end = size - 2;
  let p = BODY_AT;
  const need = (bytes: number, what: string) => {
    if (p + bytes > end) throw new BadConfiguration(`${what} needs ${bytes} bytes at ${p}, the frame's content ends at ${end}`);
  };
  const text = () => {
    const raw = Buffer.from(frame.buffer, frame.byteOffset + at + p, NAME_BYTES).toString("latin1");
    p += NAME_BYTES;
    return raw.replaceAll("\0", " ").trimEnd();
  };
  need(streamStart.size, "the stream's head");
  const { timeBase: rawBase, unitCount } = streamStart.read(view, p);
  p += streamStart.size;
  const timeBase = rawBase & 0xff_ffff;
  if (timeBase === 0) throw new BadConfiguration("TIME_BASE is 0");
  if (unitCount === 0) throw new BadConfiguration("the stream holds no unit");
  const units: UnitConfig[] = [];
  for (let k = 0; k < unitCount; k++) {
    need(NAME_BYTES + unitStart.size, `unit ${k + 1} of ${unitCount}`);
    const name = text();
    const start = unitStart.read(view, p);
    p += unitStart.size;
    const { phasorCount, analogCount, digitalCount } = start;
    need(
      (phasorCount + analogCount + 16 * digitalCount) * NAME_BYTES + 4 * (phasorCount + analogCount + digitalCount) + 4,
      `the channels of unit "${name}"`,
    );
    const phasorNames = Array.from({ length: phasorCount }, text);
    const analogNames = Array.from({ length: analogCount }, text);
    const digitalNames = Array.from({ length: digitalCount }, () => Array.from({ length: 16 }, text));
    const word = () => {
      p += 4;
      return view.getUint32(p - 4);
    };
    const phasors = phasorNames.map((channel): PhasorChannel => {
      const unit = word();
      return { name: channel, kind: unit >>> 24 === 0 ? "voltage" : "current", perBit: (unit & 0xff_ffff) * PER_BIT };
    });
    const analogs = analogNames.map((channel): AnalogChannel => {
      const unit = word();
      return { name: channel, kind: analogKinds[unit >>> 24] ?? "instantaneous", scale: (unit << 8) >> 8 };
    });
    const digitals = digitalNames.map((names): DigitalWord => {
      const masks = word();
      return { names, normal: masks >>> 16, valid: masks & 0xffff };
    });
    units.push({
      name,
      idCode: start.idCode,
      ...formatOf(start.format),
      phasors,
      analogs,
      digitals,
      nominalHz: nominalHzOf(view.getUint16(p)),
      configurationCount: view.getUint16(p + 2),
    });
    p += 4;
  }
  need(2, "DATA_RATE");
  const rate = view.getInt16(p);
  if (rate === 0) throw new BadConfiguration("DATA_RATE is 0");
  if (p + 2 !== end) throw new BadConfiguration(`${end - p - 2} bytes are left over after DATA_RATE`);
  return { idCode: view.getUint16(4), timeBase, units, reportingRateHz: rateOf(rate) };
}

/** Configuration frame 1 (all that the units can send) or 2 (what they send). */
export function encodeConfig(config: StreamConfig, type: "configuration-1" | "configuration-2", timeUs: number): Buffer {
  const unitBytes = (u: UnitConfig) =>
    NAME_BYTES +
    unitStart.size +
    (u.phasors.length + u.analogs.length + 16 * u.digitals.length) * NAME_BYTES +
    4 * (u.phasors.length + u.analogs.length + u.digitals.length) +
    4;
  const size = BODY_AT + streamStart.size + config.units.reduce((s, u) => s + unitBytes(u), 0) + 2 + 2;
  const frame = Buffer.alloc(size);
  const view = new DataView(frame.buffer, frame.byteOffset, size);
  let p = BODY_AT;
  const text = (name: string) => {
    frame.write(name.slice(0, NAME_BYTES).padEnd(NAME_BYTES), p, "latin1");
    p += NAME_BYTES;
  };
  const word = (value: number) => {
    view.setUint32(p, value >>> 0);
    p += 4;
  };
  streamStart.write(view, p, { timeBase: config.timeBase, unitCount: config.units.length });
  p += streamStart.size;
  for (const unit of config.units) {
    text(unit.name);
    unitStart.write(view, p, {
      idCode: unit.idCode,
      format: formatWordOf(unit),
      phasorCount: unit.phasors.length,
      analogCount: unit.analogs.length,
      digitalCount: unit.digitals.length,
    });
    p += unitStart.size;
    for (const channel of [...unit.phasors, ...unit.analogs]) text(channel.name);
    for (const digital of unit.digitals) for (let bit = 0; bit < 16; bit++) text(digital.names[bit] ?? "");
    for (const phasor of unit.phasors) word((phasor.kind === "voltage" ? 0 : 1) * 2 ** 24 + Math.round(phasor.perBit / PER_BIT));
    for (const analog of unit.analogs) word(analogKinds.indexOf(analog.kind) * 2 ** 24 + (analog.scale & 0xff_ffff));
    for (const digital of unit.digitals) word(digital.normal * 65_536 + digital.valid);
    view.setUint16(p, nominalWordOf(unit.nominalHz));
    view.setUint16(p + 2, unit.configurationCount);
    p += 4;
  }
  view.setInt16(p, rateWordOf(config.reportingRateHz));
  finishFrame(frame, size, type, config.idCode, timeFields(timeUs, config.timeBase));
  return frame;
}
