/**
 * The network as every stage sees it: validated, resolved, in base units. Made from the YAML file by `loadNetwork`; nothing here is optional by
 * accident: what the file may leave out has been given its stated default, or is `undefined` because "not known" is a fact of its own.
 */

export interface Complex {
  readonly re: number;
  readonly im: number;
}

export interface Station {
  readonly id: string;
  readonly name: string;
  /** Decimal degrees, WGS 84; absent when the file gives none. */
  readonly latitude?: number;
  readonly longitude?: number;
}

/** Performance class of IEC/IEEE 60255-118-1. */
export type PmuClass = "P" | "M";

export interface FeedConfig {
  readonly id: string;
  /** `tcp://host:port` */
  readonly address: string;
  /** IDCODE of the stream (1..65534). */
  readonly idCode: number;
  readonly pmuClass: PmuClass;
  /** Frames per second that are due; below one for units that send less often. */
  readonly reportingRateHz: number;
}

export const channelRoles = ["VA", "VB", "VC", "IA", "IB", "IC"] as const;
export type ChannelRole = (typeof channelRoles)[number];

/** Accuracy of an instrument transformer: ratio error in per cent of reading and phase displacement, both as limits of its class. */
export interface TransformerClass {
  readonly ratioPercent: number;
  readonly angleMinutes: number;
}

export interface Terminal {
  /** `<line id>/<station id>` */
  readonly id: string;
  readonly lineId: string;
  readonly stationId: string;
  /** Position in `Line.terminals`; 0 is the line's first terminal, from which `km` counts. */
  readonly index: number;
  /** Absent when this end is not measured. */
  readonly measured?: {
    readonly feedId: string;
    /** IDCODE of the unit inside a concentrated stream; equals the stream's for a single unit. */
    readonly unitIdCode: number;
    /** Channel name, or position among the unit's phasors counted from 0, of each role. */
    readonly channels: Readonly<Record<ChannelRole, string | number>>;
    /** +1 when the current is positive into the line, -1 when it is wired the other way. */
    readonly currentSign: 1 | -1;
    readonly vtSide: "line" | "bus";
    readonly currentTransformer: TransformerClass;
    readonly voltageTransformer: TransformerClass;
  };
  /** What feeds the line here. A converter's source impedance is not a constant. */
  readonly source: "synchronous" | "converter" | "unknown";
  /** Behind this terminal, ohm, where the file gives it. */
  readonly sourceZ1?: Complex;
  readonly sourceZ0?: Complex;
}

/** Of the whole line. */
export interface LineConstants {
  readonly z1: Complex;
  readonly z0: Complex;
  /** Shunt susceptance [S]. */
  readonly b1: number;
  readonly b0: number;
  /** Relative standard uncertainty of z1 and z0, per cent. */
  readonly z1Percent: number;
  readonly z0Percent: number;
}

export interface Tower {
  /** As painted on the tower. */
  readonly number: string;
  /** Distance along the line from the first terminal [km]. */
  readonly km: number;
  readonly latitude?: number;
  readonly longitude?: number;
}

export interface Line {
  readonly id: string;
  readonly name: string;
  readonly nominalKv: number;
  readonly lengthKm: number;
  readonly constants: LineConstants;
  /** In order; two for an ordinary line. */
  readonly terminals: readonly Terminal[];
  readonly parallel?: {
    readonly lineId: string /** Zero-sequence mutual impedance of the whole length [ohm]. */;
    readonly z0m: Complex;
  };
  readonly seriesCapacitor?: {
    readonly atKm: number;
    readonly reactanceOhm: number;
    /** Peak voltage at which the varistor limits [kV]. */
    readonly varistorKv?: number;
    /** On which side of the capacitor the near terminal's voltage transformer is, when the capacitor stands at a terminal. */
    readonly voltageTransformer: "busSide" | "lineSide";
  };
  /** Ascending in km; empty when there is no list. */
  readonly towers: readonly Tower[];
}

/** A delivery channel as written; each channel's own schema reads the rest. */
export interface ChannelConfig {
  readonly id: string;
  readonly kind: string;
  readonly [setting: string]: unknown;
}

export interface Network {
  readonly name: string;
  readonly frequencyHz: 50 | 60;
  /** How this utility names its phases, e.g. ["A","B","C"] or ["L1","L2","L3"]. */
  readonly phaseNames: readonly [string, string, string];
  /** IANA name of the control room's zone, e.g. "Etc/GMT-1"; local time is shown beside UTC. */
  readonly timeZone: string;
  readonly stations: readonly Station[];
  readonly feeds: readonly FeedConfig[];
  readonly lines: readonly Line[];
  readonly channels: readonly ChannelConfig[];
  /** The sentence on keeping distance that the utility writes for its patrols; absent until it does. */
  readonly patrolCaution?: string;
}
