/**
 * Configuration frame 3: names of any length, scales in floating point, and what the unit is; in as many frames as it takes.
 * Source: IEEE C37.118.2-2011, clause 6.4, tables 10 and 11 (from memory); layout checked against an independent dissector in test/published.
 */
import { timeFields } from "./common-header.ts";
import { BadConfiguration, formatOf, formatWordOf, nominalHzOf, nominalWordOf, rateOf, rateWordOf } from "./config-frame.ts";
import { ContentReader, ContentWriter } from "./content.ts";
import { BODY_AT, finishFrame } from "./frame-writer.ts";
import {
  type AnalogChannel,
  type DigitalWord,
  type PhasorChannel,
  phasorComponents,
  type StreamConfig,
  type UnitConfig,
  type UnitSite,
} from "./stream-config.ts";

/** CONT_IDX: alone; then the first, the second, ... and the last of several frames. */
const ALONE = 0;
const LAST = 0xffff;
/** Content that is put together is bounded before memory is taken: some 8,000 channels with long names. */
const LARGEST_CONTENT_BYTES = 1024 * 1024;
const NO_SITE: UnitSite = {
  globalId: "0".repeat(32),
  latitudeDeg: Number.POSITIVE_INFINITY,
  longitudeDeg: Number.POSITIVE_INFINITY,
  elevationM: Number.POSITIVE_INFINITY,
  serviceClass: "M",
  windowUs: -1,
  groupDelayUs: -1,
};

/** Puts the frames of one configuration together: what stands between CONT_IDX and CRC of each. */
export class Config3Assembler {
  #pieces: Buffer[] = [];
  #bytes = 0;

  /**
   * @returns the whole content after the last frame, undefined while more are due
   * @throws BadConfiguration when a frame is missing between, or the whole grows beyond its bound; the next first frame starts anew
   */
  take(frame: Uint8Array, at: number, size: number): Buffer | undefined {
    if (size < BODY_AT + 4) throw new BadConfiguration("the frame is too short for CONT_IDX");
    const index = (frame[at + BODY_AT]! << 8) | frame[at + BODY_AT + 1]!;
    const piece = Buffer.from(frame.subarray(at + BODY_AT + 2, at + size - 2));
    if (index === ALONE || index === 1) this.#forget();
    else if (this.#pieces.length === 0 || (index !== LAST && index !== this.#pieces.length + 1)) {
      const had = this.#pieces.length;
      this.#forget();
      throw new BadConfiguration(
        `piece ${index === LAST ? "(last)" : index} of configuration 3 came after ${had}: one is missing`,
      );
    }
    this.#pieces.push(piece);
    this.#bytes += piece.length;
    if (this.#bytes > LARGEST_CONTENT_BYTES) {
      this.#forget();
      throw new BadConfiguration(`configuration 3 is longer than ${LARGEST_CONTENT_BYTES} bytes`);
    }
    if (index !== ALONE && index !== LAST) return undefined;
    const whole = Buffer.concat(this.#pieces);
    this.#forget();
    return whole;
  }

  #forget(): void {
    this.#pieces = [];
    this.#bytes = 0;
  }
}

/**
 * @param content  of all its frames, as the assembler gives it
 * @throws BadConfiguration when counts and size do not fit, or a value is out of its range
 */
export function decodeConfig3(content: Uint8Array, idCode: number): StreamConfig {
  const c = new ContentReader(content, BadConfiguration);
  const timeBase = c.u32("TIME_BASE") & 0xff_ffff;
  const unitCount = c.u16("NUM_PMU");
  if (timeBase === 0) throw new BadConfiguration("TIME_BASE is 0");
  if (unitCount === 0) throw new BadConfiguration("the stream holds no unit");
  const units: UnitConfig[] = [];
  for (let k = 0; k < unitCount; k++) units.push(readUnit(c));
  const rate = c.i16("DATA_RATE");
  if (rate === 0) throw new BadConfiguration("DATA_RATE is 0");
  if (c.left > 0) throw new BadConfiguration(`${c.left} bytes are left over after DATA_RATE`);
  return { idCode, timeBase, units, reportingRateHz: rateOf(rate) };
}

function readUnit(c: ContentReader): UnitConfig {
  const name = c.name("STN");
  const idCode = c.u16("IDCODE");
  const globalId = c.hex(16, "G_PMU_ID");
  const format = formatOf(c.u16("FORMAT"));
  const counts = [c.u16("PHNMR"), c.u16("ANNMR"), c.u16("DGNMR")] as const;
  const [phasorCount, analogCount, digitalCount] = counts;
  // Least sizes, so that a broken count takes no memory: a name of no letters and the scale of each.
  c.need(13 * phasorCount + 9 * analogCount + 20 * digitalCount, `the channels of unit "${name}"`);
  const names = (count: number) => Array.from({ length: count }, () => c.name("CHNAM"));
  const phasorNames = names(phasorCount);
  const analogNames = names(analogCount);
  const digitalNames = Array.from({ length: digitalCount }, () => names(16));
  const phasors = phasorNames.map((channel): PhasorChannel => {
    const flags = c.u32("PHSCALE");
    const perBit = c.f32("PHSCALE");
    const angleRad = c.f32("PHSCALE");
    if (!Number.isFinite(perBit) || !Number.isFinite(angleRad))
      throw new BadConfiguration(`the scale of phasor "${channel}" is no number`);
    return {
      name: channel,
      kind: flags & 0x0800 ? "current" : "voltage",
      component: phasorComponents[(flags >>> 8) & 7]!,
      changes: flags >>> 16,
      perBit,
      angleRad,
    };
  });
  const analogs = analogNames.map(
    (channel): AnalogChannel => ({ name: channel, kind: "instantaneous", scale: c.f32("ANSCALE"), offset: c.f32("ANSCALE") }),
  );
  const digitals = digitalNames.map(
    (bitNames): DigitalWord => ({ names: bitNames, normal: c.u16("DIGUNIT"), valid: c.u16("DIGUNIT") }),
  );
  const latitudeDeg = c.f32("PMU_LAT");
  const longitudeDeg = c.f32("PMU_LON");
  const elevationM = c.f32("PMU_ELEV");
  const letter = String.fromCharCode(c.u8("SVC_CLASS"));
  const site: UnitSite = {
    globalId,
    latitudeDeg,
    longitudeDeg,
    elevationM,
    serviceClass: letter === "M" || letter === "P" ? letter : "unknown",
    windowUs: c.i32("WINDOW"),
    groupDelayUs: c.i32("GRP_DLY"),
  };
  return {
    name,
    idCode,
    ...format,
    phasors,
    analogs,
    digitals,
    nominalHz: nominalHzOf(c.u16("FNOM")),
    configurationCount: c.u16("CFGCNT"),
    site,
  };
}

/** @returns one frame, or several when it does not fit into `largestFrameBytes`, to be sent in this order */
export function encodeConfig3(config: StreamConfig, timeUs: number, largestFrameBytes = 65_535): Buffer[] {
  const w = new ContentWriter();
  w.u32(config.timeBase);
  w.u16(config.units.length);
  for (const unit of config.units) writeUnit(w, unit);
  w.u16(rateWordOf(config.reportingRateHz) & 0xffff);
  const content = w.bytes();
  const room = largestFrameBytes - BODY_AT - 4;
  const count = Math.ceil(content.length / room);
  return Array.from({ length: count }, (_, k) => {
    const piece = content.subarray(k * room, (k + 1) * room);
    const frame = Buffer.alloc(BODY_AT + 2 + piece.length + 2);
    frame.writeUInt16BE(count === 1 ? ALONE : k === count - 1 ? LAST : k + 1, BODY_AT);
    piece.copy(frame, BODY_AT + 2);
    finishFrame(frame, frame.length, "configuration-3", config.idCode, timeFields(timeUs, config.timeBase));
    return frame;
  });
}

function writeUnit(w: ContentWriter, unit: UnitConfig): void {
  const site = unit.site ?? NO_SITE;
  w.name(unit.name);
  w.u16(unit.idCode);
  w.hex(site.globalId);
  w.u16(formatWordOf(unit));
  for (const channels of [unit.phasors, unit.analogs, unit.digitals]) w.u16(channels.length);
  for (const channel of [...unit.phasors, ...unit.analogs]) w.name(channel.name);
  for (const digital of unit.digitals) for (let bit = 0; bit < 16; bit++) w.name(digital.names[bit] ?? "");
  for (const { kind, component, changes = 0, perBit, angleRad = 0 } of unit.phasors) {
    const code = component ? phasorComponents.indexOf(component) : phasorComponents.indexOf("positive");
    w.u16(changes);
    w.u16(((kind === "current" ? 8 : 0) | code) << 8);
    w.f32(perBit);
    w.f32(angleRad);
  }
  for (const { scale, offset = 0 } of unit.analogs) {
    w.f32(scale);
    w.f32(offset);
  }
  for (const { normal, valid } of unit.digitals) {
    w.u16(normal);
    w.u16(valid);
  }
  w.f32(site.latitudeDeg);
  w.f32(site.longitudeDeg);
  w.f32(site.elevationM);
  w.u8((site.serviceClass === "unknown" ? " " : site.serviceClass).charCodeAt(0));
  w.u32(site.windowUs >>> 0);
  w.u32(site.groupDelayUs >>> 0);
  w.u16(nominalWordOf(unit.nominalHz));
  w.u16(unit.configurationCount);
}
