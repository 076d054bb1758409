/** What a configuration frame says of a stream. Source: IEEE C37.118.2-2011, clause 6.4, tables 8 and 9 (from memory). */

export interface PhasorChannel {
  readonly name: string;
  readonly kind: "voltage" | "current";
  /** Volt or ampere per bit of an integer phasor; unused for floating point. */
  readonly perBit: number;
}

export interface AnalogChannel {
  readonly name: string;
  readonly kind: "instantaneous" | "rms" | "peak";
  /** User-defined scale, signed 24 bits, as written. */
  readonly scale: number;
}

/** One 16-bit status word. */
export interface DigitalWord {
  /** Sixteen, bit 0 first. */
  readonly names: readonly string[];
  readonly normal: number;
  readonly valid: number;
}

export interface UnitConfig {
  readonly name: string;
  readonly idCode: number;
  readonly phasorsArePolar: boolean;
  readonly phasorsAreFloat: boolean;
  readonly analogsAreFloat: boolean;
  readonly frequencyIsFloat: boolean;
  readonly phasors: readonly PhasorChannel[];
  readonly analogs: readonly AnalogChannel[];
  readonly digitals: readonly DigitalWord[];
  readonly nominalHz: 50 | 60;
  readonly configurationCount: number;
}

export interface StreamConfig {
  readonly idCode: number;
  /** Ticks of FRACSEC per second. */
  readonly timeBase: number;
  readonly units: readonly UnitConfig[];
  /** Frames per second; below one for units that send less often. */
  readonly reportingRateHz: number;
}

/** Bytes of one unit's block in a data frame. */
export const unitDataBytes = (unit: UnitConfig): number =>
  2 +
  unit.phasors.length * (unit.phasorsAreFloat ? 8 : 4) +
  (unit.frequencyIsFloat ? 8 : 4) +
  unit.analogs.length * (unit.analogsAreFloat ? 4 : 2) +
  unit.digitals.length * 2;

/** Bytes of a whole data frame. */
export const dataFrameBytes = (config: StreamConfig): number => 14 + config.units.reduce((s, u) => s + unitDataBytes(u), 0) + 2;
