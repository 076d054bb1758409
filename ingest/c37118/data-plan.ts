/**
 * Reading data frames straight into typed arrays, by a plan that is made once per configuration: no object per frame. Polar becomes re and im; absent
 * values (0x8000 in integer formats, NaN in floating point) become NaN. Source as in `data-frame.ts`.
 */
import { ABSENT, ANGLE_PER_BIT } from "./data-frame.ts";
import { dataFrameBytes, type StreamConfig, unitDataBytes } from "./stream-config.ts";

const enumerated = { rectFloat: 0, polarFloat: 1, rectInt: 2, polarInt: 3 } as const;

export interface DataPlan {
  readonly frameBytes: number;
  readonly timeBase: number;
  /** [columns] where each phasor stands in the frame, how it is written, and its volt or ampere per bit. */
  readonly offsets: Int32Array;
  readonly formats: Uint8Array;
  readonly perBit: Float64Array;
  /** Columns whose angle the configuration corrects, and cos and sin of each correction; mostly none. */
  readonly turned: Int32Array;
  readonly turns: Float64Array;
  /** [units] where STAT and FREQ stand, whether FREQ is floating point, nominal frequency. */
  readonly statAt: Int32Array;
  readonly frequencyAt: Int32Array;
  readonly frequencyIsFloat: Uint8Array;
  readonly nominalHz: Float64Array;
}

export function planOf(config: StreamConfig): DataPlan {
  const columns = config.units.flatMap((unit) => unit.phasors.map((phasor) => ({ unit, phasor })));
  const offsets = new Int32Array(columns.length);
  let column = 0;
  let unitAt = 14;
  const statAt = new Int32Array(config.units.length);
  const frequencyAt = new Int32Array(config.units.length);
  config.units.forEach((unit, k) => {
    statAt[k] = unitAt;
    const size = unit.phasorsAreFloat ? 8 : 4;
    unit.phasors.forEach((_, n) => {
      offsets[column++] = unitAt + 2 + n * size;
    });
    frequencyAt[k] = unitAt + 2 + unit.phasors.length * size;
    unitAt += unitDataBytes(unit);
  });
  const turned = columns.flatMap(({ unit, phasor }, k) =>
    phasor.angleRad && !unit.phasorsAreFloat ? [[k, -phasor.angleRad] as const] : [],
  );
  return {
    frameBytes: dataFrameBytes(config),
    timeBase: config.timeBase,
    offsets,
    formats: Uint8Array.from(columns, ({ unit }) =>
      unit.phasorsAreFloat
        ? unit.phasorsArePolar
          ? enumerated.polarFloat
          : enumerated.rectFloat
        : unit.phasorsArePolar
          ? enumerated.polarInt
          : enumerated.rectInt,
    ),
    turned: Int32Array.from(turned, ([k]) => k),
    turns: Float64Array.from(turned.flatMap(([, angle]) => [Math.cos(angle), Math.sin(angle)])),
    perBit: Float64Array.from(columns, ({ phasor }) => phasor.perBit),
    statAt,
    frequencyAt,
    frequencyIsFloat: Uint8Array.from(config.units, (u) => Number(u.frequencyIsFloat)),
    nominalHz: Float64Array.from(config.units, (u) => u.nominalHz),
  };
}

export interface RowTarget {
  readonly phasors: Float64Array;
  readonly frequencyHz: Float64Array;
  readonly rocofHzPerS: Float64Array;
  readonly stat: Uint16Array;
}

/** @param frameAt  where a frame of the plan's size begins in `view`; its CRC has been checked */
export function decodeRowInto(target: RowTarget, row: number, plan: DataPlan, view: DataView, frameAt: number): void {
  const columns = plan.offsets.length;
  const { phasors } = target;
  let to = row * columns * 2;
  for (let k = 0; k < columns; k++, to += 2) {
    const at = frameAt + plan.offsets[k]!;
    switch (plan.formats[k]) {
      case enumerated.rectFloat:
        phasors[to] = view.getFloat32(at);
        phasors[to + 1] = view.getFloat32(at + 4);
        break;
      case enumerated.polarFloat:
        turn(phasors, to, view.getFloat32(at), view.getFloat32(at + 4));
        break;
      case enumerated.rectInt: {
        const re = view.getInt16(at);
        const im = view.getInt16(at + 2);
        const scale = re === ABSENT || im === ABSENT ? Number.NaN : plan.perBit[k]!;
        phasors[to] = re * scale;
        phasors[to + 1] = im * scale;
        break;
      }
      default: {
        const magnitude = view.getUint16(at);
        const angle = view.getInt16(at + 2);
        turn(phasors, to, angle === ABSENT ? Number.NaN : magnitude * plan.perBit[k]!, angle * ANGLE_PER_BIT);
      }
    }
  }
  for (let n = 0; n < plan.turned.length; n++) {
    const on = (row * columns + plan.turned[n]!) * 2;
    const re = phasors[on]!;
    const im = phasors[on + 1]!;
    phasors[on] = re * plan.turns[2 * n]! - im * plan.turns[2 * n + 1]!;
    phasors[on + 1] = re * plan.turns[2 * n + 1]! + im * plan.turns[2 * n]!;
  }
  const units = plan.statAt.length;
  for (let u = 0; u < units; u++) {
    const out = row * units + u;
    const at = frameAt + plan.frequencyAt[u]!;
    target.stat[out] = view.getUint16(frameAt + plan.statAt[u]!);
    if (plan.frequencyIsFloat[u]) {
      target.frequencyHz[out] = view.getFloat32(at);
      target.rocofHzPerS[out] = view.getFloat32(at + 4);
    } else {
      const deviation = view.getInt16(at);
      const rocof = view.getInt16(at + 2);
      target.frequencyHz[out] = deviation === ABSENT ? Number.NaN : plan.nominalHz[u]! + deviation / 1000;
      target.rocofHzPerS[out] = rocof === ABSENT ? Number.NaN : rocof / 100;
    }
  }
}

function turn(out: Float64Array, at: number, magnitude: number, angleRad: number): void {
  out[at] = magnitude * Math.cos(angleRad);
  out[at + 1] = magnitude * Math.sin(angleRad);
}
