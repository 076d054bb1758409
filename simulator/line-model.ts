/**
 * One line between two sources, three phases, as coupled pi sections with a breaker at each end; a fault can be put between any two sections. Gives the
 * instantaneous values at both ends.
 */
import type { Line } from "../config/index.ts";
import { Circuit, phaseMatrix, type SquareMatrix } from "./circuit.ts";

/** A source behind its short-circuit impedance; angle of its voltage against the other end's. */
export interface Source {
  readonly z1: readonly [number, number];
  readonly z0: readonly [number, number];
  readonly angleDeg: number;
  /** Of nominal. */
  readonly voltagePerUnit: number;
}

export interface Fault {
  /** "AG", "BC", "CAG", "ABC" and so on. */
  readonly type: string;
  /** From the line's first terminal. */
  readonly km: number;
  /** To ground, or between the phases where ground is not in it. */
  readonly ohm: number;
}

/** Samples a cycle that measuring units see, and steps of the solution between two of them. */
export const SAMPLES_PER_CYCLE = 16;
const STEPS_PER_SAMPLE = 8;
/** Longest pi section [km]: 15 km of overhead line ring at some kHz, far above what a measuring window passes. */
const SECTION_KM = 15;
/** Arms between the faulted phases and their common point [ohm]: an arc between conductors. */
const ARM_OHM = 0.05;

export interface Episode {
  readonly line: Line;
  readonly fault: Fault | undefined;
  /** Of the steady state before: both breakers closed, or open. */
  readonly startsClosed: boolean;
  /** Seconds from the start of the episode. */
  readonly onsetS: number;
  /** When each end's breaker is told to open (Infinity: never); each pole then waits for its current's zero. */
  readonly openS: readonly [number, number];
  /** When each end's breaker closes (Infinity: never). */
  readonly closeS: readonly [number, number];
  readonly durationS: number;
}

export interface EndSamples {
  /** [6][samples] VA VB VC IA IB IC, volt and ampere, currents into the line. */
  readonly channels: readonly Float64Array[];
}

/** The first sample holds half its steps only: begin to use them at the second. */
export interface Waveforms {
  readonly sampleS: number;
  readonly ends: readonly [EndSamples, EndSamples];
  /** When each pole of each end opened, seconds from the start; Infinity when it did not. */
  readonly opened: readonly [readonly number[], readonly number[]];
}

/** Peak phasors (cosine) of the three phases of a source. */
function emf(line: Line, source: Source): { re: number; im: number }[] {
  const peak = ((line.nominalKv * 1e3) / Math.sqrt(3)) * Math.SQRT2 * source.voltagePerUnit;
  return [0, -120, 120].map((shift) => {
    const angle = ((source.angleDeg + shift) * Math.PI) / 180;
    return { re: peak * Math.cos(angle), im: peak * Math.sin(angle) };
  });
}

/** Nodal conductance of a shunt fault: arms to a common point, which goes to ground through `ohm`; or `ohm` between two phases. */
function faultConductance(type: string, ohm: number): number[][] {
  const g = [0, 1, 2].map(() => [0, 0, 0]);
  const on = [..."ABC"].flatMap((p, k) => (type.includes(p) ? [k] : []));
  const arm =
    on.length === 1
      ? 1 / Math.max(ohm, 1e-3)
      : on.length === 2 && !type.includes("G")
        ? 2 / Math.max(ohm, 2 * ARM_OHM)
        : 1 / (on.length === 3 ? Math.max(ohm, ARM_OHM) : ARM_OHM);
  if (on.length === 1) {
    g[on[0]!]![on[0]!] = arm;
    return g;
  }
  // Star with equal arms, its middle to ground through `ohm` (Kron reduction of the middle).
  const middle = on.length * arm + (type.includes("G") ? 1 / Math.max(ohm, 1e-3) : 0);
  for (const a of on) for (const b of on) g[a]![b] = (a === b ? arm : 0) - (arm * arm) / middle;
  return g;
}

/**
 * @param t0S  absolute time of the episode's start, for the sources' phase: a whole number of samples since a second's start
 */
export function runEpisode(episode: Episode, sources: readonly [Source, Source], nominalHz: number, t0S: number): Waveforms {
  const { line, fault } = episode;
  const sampleS = 1 / (nominalHz * SAMPLES_PER_CYCLE);
  const circuit = new Circuit(sampleS / STEPS_PER_SAMPLE, nominalHz);
  const w = circuit.omega;
  const { z1, z0, b1, b0 } = line.constants;
  const scaled = (m: SquareMatrix, k: number) => m.map((row) => row.map((x) => x * k));
  const r = phaseMatrix(z0.re, z1.re);
  const l = scaled(phaseMatrix(z0.im, z1.im), 1 / w);
  const c = scaled(phaseMatrix(b0, b1), 1 / w);

  const faultKm = fault?.km ?? line.lengthKm / 2;
  const lengths = [faultKm, line.lengthKm - faultKm].flatMap((km) => {
    const n = Math.max(1, Math.ceil(km / SECTION_KM));
    return km <= 0 ? [] : new Array<number>(n).fill(km / n);
  });
  const joints = [circuit.addNodes(3)];
  const heads: number[] = [];
  const capacitance: number[] = [0];
  for (const km of lengths) {
    const share = km / line.lengthKm;
    joints.push(circuit.addNodes(3));
    const [a, b] = [joints.at(-2)!, joints.at(-1)!];
    heads.push(circuit.addBranch(a, b, scaled(r, share), scaled(l, share)));
    capacitance[capacitance.length - 1]! += share / 2;
    capacitance.push(share / 2);
  }
  if (b1 > 0) for (const [k, nodes] of joints.entries()) circuit.addCapacitor(nodes, scaled(c, capacitance[k]!));
  let faultJoint = joints[0]!;
  for (let k = 0, km = 0; k < lengths.length; k++) {
    km += lengths[k]!;
    if (km <= faultKm + 1e-9) faultJoint = joints[k + 1]!;
  }
  if (faultKm <= 0) faultJoint = joints[0]!;

  const ends = ([0, 1] as const).map((e) => {
    const source = sources[e];
    const bus = circuit.addNodes(3);
    const phasors = emf(line, source);
    const own = phasors.map(({ re, im }) => ({ re, im }));
    circuit.addBranch(
      [-1, -1, -1],
      bus,
      phaseMatrix(source.z0[0], source.z1[0]),
      scaled(phaseMatrix(source.z0[1], source.z1[1]), 1 / w),
      (t, k) => own[k]!.re * Math.cos(w * t) - own[k]!.im * Math.sin(w * t),
      own,
    );
    const lineEnd = e === 0 ? joints[0]! : joints.at(-1)!;
    const poles = bus.map((node, k) => circuit.addSwitch(node, lineEnd[k]!, episode.startsClosed));
    return {
      bus,
      lineEnd,
      poles,
      vtNodes: line.terminals[e]?.measured?.vtSide === "bus" ? bus : lineEnd,
      before: [0, 0, 0],
      opened: [Infinity, Infinity, Infinity],
    };
  });

  circuit.startSteady(t0S);
  const samples = Math.floor(episode.durationS / sampleS);
  const channels = ends.map(() => Array.from({ length: 6 }, () => new Float64Array(samples)));
  // Each sample is the mean of the steps around it: a zero-phase filter against aliasing, whose gain at nominal is divided out.
  const gain = Math.sin((w * sampleS) / 2) / (STEPS_PER_SAMPLE * Math.tan((w * circuit.stepS) / 2));
  const weight = 1 / (STEPS_PER_SAMPLE * gain);
  let isFaulted = false;
  for (let step = 0; step < samples * STEPS_PER_SAMPLE; step++) {
    const t = step * circuit.stepS;
    if (fault && !isFaulted && t >= episode.onsetS) {
      circuit.setShunt({ nodes: faultJoint, g: faultConductance(fault.type, fault.ohm) });
      isFaulted = true;
    }
    circuit.step();
    ends.forEach((end, e) => {
      end.poles.forEach((pole, k) => {
        const i = circuit.switchCurrent(pole);
        if (circuit.isClosed(pole) && t >= episode.openS[e]! && t < episode.closeS[e]! && i * end.before[k]! <= 0) {
          circuit.setSwitch(pole, false);
          end.opened[k] = t;
        } else if (!circuit.isClosed(pole) && t >= episode.closeS[e]!) circuit.setSwitch(pole, true);
        end.before[k] = i;
      });
      // Currents as they were solved, before a pole changed its state.
      // Half a sample's steps to either side, the outermost shared with the neighbour.
      const after = (step + 1) % STEPS_PER_SAMPLE;
      const n = Math.floor((step + 1) / STEPS_PER_SAMPLE);
      const half = STEPS_PER_SAMPLE / 2;
      const shares =
        after < half
          ? [[n, weight] as const]
          : after > half
            ? [[n + 1, weight] as const]
            : ([
                [n, weight / 2],
                [n + 1, weight / 2],
              ] as const);
      for (const [sample, share] of shares) {
        if (sample >= samples) continue;
        for (let k = 0; k < 3; k++) {
          channels[e]![k]![sample]! += share * circuit.v[end.vtNodes[k]!]!;
          channels[e]![3 + k]![sample]! += share * end.before[k]!;
        }
      }
    });
  }
  const asEnd = (e: number): EndSamples => ({ channels: channels[e]! });
  return { sampleS, ends: [asEnd(0), asEnd(1)], opened: [ends[0]!.opened, ends[1]!.opened] };
}
