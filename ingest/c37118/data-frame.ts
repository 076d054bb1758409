/** Writing data frames. Source: IEEE C37.118.2-2011, clause 6.3, tables 5 and 6 (from memory). Reading, which is hot, is `data-plan.ts`. */
import { timeFields } from "./common-header.ts";
import { BODY_AT, finishFrame } from "./frame-writer.ts";
import { dataFrameBytes, type StreamConfig, type UnitConfig } from "./stream-config.ts";

export interface UnitData {
  readonly stat: number;
  /** [phasors × (re, im)] rms volt or ampere; NaN marks a value that is absent. */
  readonly phasors: ArrayLike<number>;
  readonly frequencyHz: number;
  readonly rocofHzPerS: number;
  readonly analogs?: ArrayLike<number>;
  readonly digitals?: ArrayLike<number>;
}

/** Angles of integer polar phasors count 10⁻⁴ rad. */
export const ANGLE_PER_BIT = 1e-4;
/** Stands for an absent value in integer formats. */
export const ABSENT = -0x8000;

const toI16 = (x: number): number => (Number.isNaN(x) ? ABSENT : Math.max(-32_767, Math.min(32_767, Math.round(x))));

/**
 * Values beyond an integer format's range are held at its end, as units do.
 * @param into   where to write; a new buffer when left out
 * @param quality  high byte of FRACSEC
 * @returns the frame
 */
export function encodeData(config: StreamConfig, timeUs: number, units: readonly UnitData[], quality = 0, into?: Buffer): Buffer {
  if (units.length !== config.units.length)
    throw new RangeError(`data of ${units.length} units, the configuration has ${config.units.length}`);
  const size = dataFrameBytes(config);
  const frame = into ?? Buffer.alloc(size);
  const view = new DataView(frame.buffer, frame.byteOffset, size);
  let p = BODY_AT;
  config.units.forEach((unit, k) => {
    p = writeUnit(view, p, unit, units[k]!);
  });
  finishFrame(frame, size, "data", config.idCode, timeFields(timeUs, config.timeBase, quality));
  return frame.length === size ? frame : frame.subarray(0, size);
}

function writeUnit(view: DataView, start: number, unit: UnitConfig, data: UnitData): number {
  let p = start;
  view.setUint16(p, data.stat);
  p += 2;
  unit.phasors.forEach((channel, k) => {
    const re = data.phasors[2 * k]!;
    const im = data.phasors[2 * k + 1]!;
    const [first, second] = unit.phasorsArePolar ? [Math.hypot(re, im), Math.atan2(im, re)] : [re, im];
    if (unit.phasorsAreFloat) {
      view.setFloat32(p, first);
      view.setFloat32(p + 4, second);
      p += 8;
    } else {
      if (unit.phasorsArePolar) {
        view.setUint16(p, Number.isNaN(first) ? 0x8000 : Math.min(65_535, Math.round(first / channel.perBit)));
        view.setInt16(p + 2, toI16(second / ANGLE_PER_BIT));
      } else {
        view.setInt16(p, toI16(first / channel.perBit));
        view.setInt16(p + 2, toI16(second / channel.perBit));
      }
      p += 4;
    }
  });
  if (unit.frequencyIsFloat) {
    view.setFloat32(p, data.frequencyHz);
    view.setFloat32(p + 4, data.rocofHzPerS);
    p += 8;
  } else {
    view.setInt16(p, toI16((data.frequencyHz - unit.nominalHz) * 1000));
    view.setInt16(p + 2, toI16(data.rocofHzPerS * 100));
    p += 4;
  }
  unit.analogs.forEach((_, k) => {
    const value = data.analogs?.[k] ?? 0;
    if (unit.analogsAreFloat) view.setFloat32(p, value);
    else view.setInt16(p, toI16(value));
    p += unit.analogsAreFloat ? 4 : 2;
  });
  unit.digitals.forEach((_, k) => {
    view.setUint16(p, data.digitals?.[k] ?? 0);
    p += 2;
  });
  return p;
}
