/**
 * What a line's units measure over time: steady states, with solved episodes between them. Quiet time costs a few sums; the network is solved only around
 * an event.
 */
import type { Line, Network, Terminal } from "../config/index.ts";
import type { StreamConfig } from "../ingest/index.ts";
import { type Episode, runEpisode, SAMPLES_PER_CYCLE, type Source, type Waveforms } from "./line-model.ts";
import { filterOf, measureInto, pClassCorrection } from "./measuring-unit.ts";
import { type Random, randomFrom } from "./random.ts";

/** Solved before and after what happens, so that every window of an M class unit at 10 frames/s that touches it finds samples. */
const MARGIN_S = 0.6;

export interface Piece {
  /** µs since 1970 UTC, on a sample. */
  readonly startUs: number;
  readonly endUs: number;
  readonly waves: Waveforms;
}

/** Instrument transformers' errors of one terminal: re and im of each channel's gain. */
function drawGains(terminal: Terminal, size: number, random: Random): Float64Array {
  const gains = new Float64Array(12);
  for (let c = 0; c < 6; c++) {
    const limit = c < 3 ? terminal.measured!.voltageTransformer : terminal.measured!.currentTransformer;
    const ratio = 1 + (size * limit.ratioPercent * (2 * random.uniform() - 1)) / 100;
    const angle = (((size * limit.angleMinutes * (2 * random.uniform() - 1)) / 60) * Math.PI) / 180;
    gains[2 * c] = ratio * Math.cos(angle);
    gains[2 * c + 1] = ratio * Math.sin(angle);
  }
  return gains;
}

/** One measured end of a line: gives the frame of any time that is not in the future of what has been planned. */
export class MeasuredEnd {
  readonly terminal: Terminal;
  readonly config: StreamConfig;
  readonly feedId: string;
  readonly periodUs: number;
  /** Seconds from a frame's stamp until its window is complete. */
  readonly halfWindowS: number;
  readonly #course: LineCourse;
  readonly #filter: Float64Array;
  readonly #isP: boolean;
  readonly #gains: Float64Array;
  readonly #noise: number;
  readonly #random: Random;
  readonly #row = new Float64Array(12);

  constructor(
    network: Network,
    course: LineCourse,
    terminal: Terminal,
    options: { noise: number; instrumentErrors: number; seed: number },
  ) {
    const feed = network.feeds.find((f) => f.id === terminal.measured!.feedId)!;
    this.terminal = terminal;
    this.feedId = feed.id;
    this.#course = course;
    this.#filter = filterOf(feed.pmuClass, network.frequencyHz, feed.reportingRateHz);
    this.#isP = feed.pmuClass === "P";
    this.periodUs = 1e6 / feed.reportingRateHz;
    this.halfWindowS = this.#filter.length / 2 / (SAMPLES_PER_CYCLE * network.frequencyHz);
    this.#noise = options.noise;
    this.#random = randomFrom(options.seed);
    this.#gains = drawGains(terminal, options.instrumentErrors, this.#random);
    const station = network.stations.find((s) => s.id === terminal.stationId)!.name;
    this.config = {
      idCode: feed.idCode,
      timeBase: 1_000_000,
      reportingRateHz: feed.reportingRateHz,
      units: [
        {
          name: `${station} ${course.line.name}`.slice(0, 16),
          idCode: terminal.measured!.unitIdCode,
          phasorsArePolar: false,
          phasorsAreFloat: true,
          analogsAreFloat: true,
          frequencyIsFloat: true,
          phasors: ["VA", "VB", "VC", "IA", "IB", "IC"].map((name, k) => ({
            name,
            kind: k < 3 ? ("voltage" as const) : ("current" as const),
            perBit: k < 3 ? 10 : 0.1,
          })),
          analogs: [],
          digitals: [],
          nominalHz: network.frequencyHz,
          configurationCount: 1,
        },
      ],
    };
  }

  /** rms phasors of the frame stamped `timeUs`, and frequency. The returned array is used again. */
  measure(timeUs: number): { phasors: Float64Array; frequencyHz: number; rocofHzPerS: number } {
    const row = this.#row;
    const end = this.terminal.index as 0 | 1;
    const nominal = this.#course.nominalHz;
    const at = (us: number, out: Float64Array) => this.#course.phasorsInto(end, us, this.#filter, out);
    at(timeUs, row);
    let deviation = 0;
    if (!this.#course.isSteadyAround(timeUs, this.halfWindowS + 2 / nominal)) {
      // Frequency from the turn of positive-sequence voltage over two cycles around the stamp.
      const [before, after] = [new Float64Array(12), new Float64Array(12)];
      at(timeUs - 1e6 / nominal, before);
      at(timeUs + 1e6 / nominal, after);
      deviation = turnOf(before, after) / (2 * Math.PI * (2 / nominal));
      if (!(Math.abs(deviation) < 10)) deviation = 0;
      if (this.#isP) {
        const correction = pClassCorrection(nominal, deviation);
        for (let k = 0; k < 12; k++) row[k]! *= correction;
      }
    }
    for (let c = 0; c < 6; c++) {
      const [re, im] = [row[2 * c]!, row[2 * c + 1]!];
      const [gRe, gIm] = [this.#gains[2 * c]!, this.#gains[2 * c + 1]!];
      const size = (this.#noise * Math.max(Math.hypot(re, im), this.#course.ratedOf(c) * 0.02)) / Math.SQRT2;
      row[2 * c] = re * gRe - im * gIm + size * this.#random.normal();
      row[2 * c + 1] = re * gIm + im * gRe + size * this.#random.normal();
    }
    return {
      phasors: row,
      frequencyHz: nominal + deviation + 0.0005 * this.#random.normal(),
      rocofHzPerS: 0.01 * this.#random.normal(),
    };
  }
}

/** Angle [rad] by which positive-sequence voltage turned between two rows; 0 when there is none. */
function turnOf(before: Float64Array, after: Float64Array): number {
  const v1 = (x: Float64Array) => {
    const s = Math.sqrt(3) / 2;
    return [
      (x[0]! - 0.5 * (x[2]! + x[4]!) - s * (x[3]! - x[5]!)) / 3,
      (x[1]! - 0.5 * (x[3]! + x[5]!) - s * (x[4]! - x[2]!)) / 3,
    ] as const;
  };
  const [a, b] = [v1(before), v1(after)];
  if (Math.hypot(...a) < 1e3 || Math.hypot(...b) < 1e3) return 0;
  return Math.atan2(b[1] * a[0] - b[0] * a[1], b[0] * a[0] + b[1] * a[1]);
}

/** One line's life: closed until something happens, then as the episodes leave it. */
export class LineCourse {
  readonly line: Line;
  readonly nominalHz: number;
  readonly #sources: readonly [Source, Source];
  readonly #steady: Record<"closed" | "open", readonly [Float64Array, Float64Array]>;
  readonly #pieces: Piece[] = [];
  /** State that the last piece leaves behind. */
  #isClosed = true;
  readonly #states: { fromUs: number; isClosed: boolean }[] = [{ fromUs: Number.NEGATIVE_INFINITY, isClosed: true }];

  constructor(line: Line, nominalHz: number, sources: readonly [Source, Source]) {
    this.line = line;
    this.nominalHz = nominalHz;
    this.#sources = sources;
    this.#steady = { closed: this.#steadyPhasors(true), open: this.#steadyPhasors(false) };
  }

  get isClosed(): boolean {
    return this.#isClosed;
  }

  /** Size of a channel in the closed steady state. */
  ratedOf(channel: number): number {
    const x = this.#steady.closed[0];
    return Math.hypot(x[2 * channel]!, x[2 * channel + 1]!);
  }

  /**
   * Plans what happens at `atUs`; returns the solved piece.
   * @param open, close  seconds after `atUs` for each end; Infinity: never
   */
  plan(atUs: number, fault: Episode["fault"], open: readonly [number, number], close: readonly [number, number]): Piece {
    const sampleUs = 1e6 / (this.nominalHz * SAMPLES_PER_CYCLE);
    const second = Math.floor((atUs - MARGIN_S * 1e6) / 1e6) * 1e6;
    const startUs = second + Math.floor((atUs - MARGIN_S * 1e6 - second) / sampleUs) * sampleUs;
    const last = Math.max(...[...open, ...close].filter(Number.isFinite), 0);
    const onsetS = (atUs - startUs) / 1e6;
    const durationS = onsetS + last + 0.05 + MARGIN_S;
    const episode: Episode = {
      line: this.line,
      fault,
      startsClosed: this.#isClosed,
      onsetS,
      openS: [onsetS + open[0], onsetS + open[1]],
      closeS: [onsetS + close[0], onsetS + close[1]],
      durationS,
    };
    const waves = runEpisode(episode, this.#sources, this.nominalHz, (startUs - second) / 1e6);
    const piece = { startUs, endUs: startUs + (waves.ends[0].channels[0]!.length - 1) * sampleUs, waves };
    this.#pieces.push(piece);
    if (this.#pieces.length > 4) this.#pieces.shift();
    if (Number.isFinite(open[0])) this.#isClosed = false;
    if (Number.isFinite(close[0])) this.#isClosed = true;
    this.#states.push({ fromUs: atUs, isClosed: this.#isClosed });
    return piece;
  }

  isSteadyAround(timeUs: number, halfS: number): boolean {
    return !this.#pieces.some((p) => timeUs + halfS * 1e6 > p.startUs && timeUs - halfS * 1e6 < p.endUs);
  }

  phasorsInto(end: 0 | 1, timeUs: number, filter: Float64Array, out: Float64Array): void {
    const sampleUs = 1e6 / (this.nominalHz * SAMPLES_PER_CYCLE);
    const halfS = (filter.length / 2 / (this.nominalHz * SAMPLES_PER_CYCLE)) as number;
    const steady = this.#stateAt(timeUs)[end];
    const piece = this.#pieces.find((p) => timeUs + halfS * 1e6 > p.startUs && timeUs - halfS * 1e6 < p.endUs);
    if (!piece) {
      out.set(steady);
      return;
    }
    const second = Math.floor(timeUs / 1e6) * 1e6;
    const centre = Math.round((timeUs - second) / sampleUs);
    const pieceAt = Math.round((piece.startUs - second) / sampleUs);
    const samples = piece.waves.ends[end].channels[0]!.length;
    const [before, after] = [this.#stateAt(piece.startUs)[end], this.#stateAt(piece.endUs)[end]];
    for (let c = 0; c < 6; c++) {
      const wave = piece.waves.ends[end].channels[c]!;
      const sampleAt = (k: number): number => {
        const n = k - pieceAt;
        if (n >= 1 && n < samples - 1) return wave[n]!;
        const x = n < 1 ? before : after;
        const angle = (2 * Math.PI * k) / SAMPLES_PER_CYCLE;
        return Math.SQRT2 * (x[2 * c]! * Math.cos(angle) - x[2 * c + 1]! * Math.sin(angle));
      };
      measureInto(filter, sampleAt, centre, out, 2 * c);
    }
  }

  #stateAt(timeUs: number): readonly [Float64Array, Float64Array] {
    const state = this.#states.findLast((s) => s.fromUs <= timeUs)!;
    return this.#steady[state.isClosed ? "closed" : "open"];
  }

  /** rms phasors of both ends in a steady state: from a short solved piece in which nothing happens. */
  #steadyPhasors(isClosed: boolean): readonly [Float64Array, Float64Array] {
    const never = [Number.POSITIVE_INFINITY, Number.POSITIVE_INFINITY] as const;
    const cycle = SAMPLES_PER_CYCLE;
    const episode: Episode = {
      line: this.line,
      fault: undefined,
      startsClosed: isClosed,
      onsetS: 1,
      openS: never,
      closeS: never,
      durationS: 4 / this.nominalHz,
    };
    const { ends } = runEpisode(episode, this.#sources, this.nominalHz, 0);
    const filter = new Float64Array(2 * cycle + 1).fill(1 / (2 * cycle));
    filter[0] = filter[2 * cycle] = 0.5 / (2 * cycle);
    const rows = ends.map(({ channels }) => {
      const row = new Float64Array(12);
      for (const [c, wave] of channels.entries()) measureInto(filter, (k) => wave[k]!, 2 * cycle, row, 2 * c);
      return row;
    });
    return [rows[0]!, rows[1]!];
  }
}
