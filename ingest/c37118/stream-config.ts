/**
 * What a configuration frame says of a stream; what only configuration frame 3 can say is optional. Source: IEEE C37.118.2-2011, clause 6.4, tables 8
 * to 11 (from memory).
 */

export interface PhasorChannel {
  readonly name: string;
  readonly kind: "voltage" | "current";
  /** Volt or ampere per bit of an integer phasor; unused for floating point. */
  readonly perBit: number;
  /** Configuration 3: by how much the angles of an integer phasor are sent too large [rad]; sign, and that floating point is left alone, as an independent dissector reads it (test/published). */
  readonly angleRad?: number;
  /** Configuration 3: which sequence or phase it is. */
  readonly component?: PhasorComponent;
  /** Configuration 3: how the unit changed it (resampled, filtered, calibrated, rotated, made up), 16 flags as sent. */
  readonly changes?: number;
}

/** The place of each is its code. */
export const phasorComponents = ["zero", "positive", "negative", "reserved-3", "A", "B", "C", "reserved-7"] as const;
export type PhasorComponent = (typeof phasorComponents)[number];

export interface AnalogChannel {
  readonly name: string;
  readonly kind: "instantaneous" | "rms" | "peak";
  /** Configurations 1 and 2: user-defined scale, signed 24 bits, as written. Configuration 3: value = scale · sent + offset. */
  readonly scale: number;
  readonly offset?: number;
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
  /** Configuration 3 only. */
  readonly site?: UnitSite;
}

/** What a configuration frame 3 tells of the unit itself. */
export interface UnitSite {
  /** 32 hexadecimal digits, chosen by the user. */
  readonly globalId: string;
  /** WGS 84; Infinity when not told. */
  readonly latitudeDeg: number;
  readonly longitudeDeg: number;
  readonly elevationM: number;
  /** As in IEEE C37.118.1; whatever else a unit sends is kept as "unknown". */
  readonly serviceClass: "M" | "P" | "unknown";
  /** Length of the measuring window with all filters; -1 when not told. */
  readonly windowUs: number;
  readonly groupDelayUs: number;
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
