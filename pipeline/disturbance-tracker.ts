/**
 * From blocks of frames to what happened: notices onsets, groups those of one moment into one disturbance, follows each to its end. Time is the
 * frames' own; a newest tag over all feeds (or a tick, when every feed has stopped) is the clock that ends waiting. Plain state, no timers: the
 * same blocks in the same order give the same events.
 */
import type { Line, Network, Terminal } from "../config/index.ts";
import type { FrameBlock, FrameRing } from "../ingest/types.ts";
import { captureTerminal, newestCurrentAmp } from "./capture.ts";
import { type CapturedEnd, type Finding, locate } from "./locate.ts";
import { type MeasuringWindow, referenceWindow } from "./measuring-window.ts";
import { OnsetDetector, type Trigger } from "./onset-detector.ts";
import { progressOf } from "./steadiness.ts";
import { type TerminalView, viewTerminal } from "./terminal-view.ts";
import type { DisturbanceEvent, LocateStage } from "./types.ts";

/** Stamps of one moment differ by the difference of the units' half windows (up to 0.3 s at 10 frames/s) and by waves of the network itself. */
const SAME_MOMENT_US = 350_000;
/** How much undisturbed time is captured with a disturbance. */
const BEFORE_US = 600_000;
/** Rest after the last change until the answer is settled. */
const SETTLE_US = 250_000;
/** How long one end waits for the other's frames before it is settled alone. */
const OTHER_END_US = 1_000_000;
/** A fault that still flows is located as such after this. */
const STILL_ON_US = 1_500_000;
/** After this nothing more is expected of one disturbance. */
const GIVE_UP_US = 10_000_000;
/** Current under this share of its largest in the disturbance is "no current". */
const NO_CURRENT_SHARE = 0.02;

interface Watched {
  readonly terminal: Terminal;
  readonly line: Line;
  readonly window: MeasuringWindow;
  readonly nominalHz: 50 | 60;
  ring: FrameRing | undefined;
  view: TerminalView | undefined;
  detector: OnsetDetector | undefined;
}

interface Open {
  readonly id: string;
  /** Earliest disturbed stamp of any terminal so far. */
  detectedUs: number;
  /** By terminal id. */
  readonly triggers: Map<string, Trigger>;
  stage: LocateStage | undefined;
  /** Line and place told last. */
  told: { lineId: string; stretch: readonly [number, number] | null } | undefined;
  isCleared: boolean;
  lastTriedUs: number;
  /** Data time since which at least one terminal of the line in question has been at rest. */
  someRestUs: number | undefined;
}

export interface TrackerProblem {
  readonly feedId: string;
  readonly terminalId: string;
  readonly problem: string;
}

export class DisturbanceTracker {
  readonly #network: Network;
  readonly #byFeed = new Map<string, Watched[]>();
  readonly #byTerminal = new Map<string, Watched>();
  readonly #open: Open[] = [];
  readonly #onProblem: (problem: TrackerProblem) => void;
  #newestUs = 0;

  /** @param onProblem  told once per configuration when a terminal's channels are not in its stream */
  constructor(network: Network, onProblem: (problem: TrackerProblem) => void = () => {}) {
    this.#network = network;
    this.#onProblem = onProblem;
    for (const line of network.lines) {
      for (const terminal of line.terminals) {
        if (!terminal.measured) continue;
        const feed = network.feeds.find((f) => f.id === terminal.measured!.feedId)!;
        const window = referenceWindow(feed.pmuClass, network.frequencyHz, feed.reportingRateHz);
        const watched: Watched = {
          terminal,
          line,
          window,
          nominalHz: network.frequencyHz,
          ring: undefined,
          view: undefined,
          detector: undefined,
        };
        this.#byFeed.set(feed.id, [...(this.#byFeed.get(feed.id) ?? []), watched]);
        this.#byTerminal.set(terminal.id, watched);
      }
    }
  }

  /** What a block of frames brings to light; usually nothing. */
  step(block: FrameBlock): DisturbanceEvent[] {
    const events: DisturbanceEvent[] = [];
    const newest = block.ring.rowOf(block.ring.newestSlot);
    if (newest >= 0) this.#newestUs = Math.max(this.#newestUs, block.ring.timeUs[newest]!);
    for (const watched of this.#byFeed.get(block.feedId) ?? []) {
      if (watched.ring !== block.ring) this.#bind(watched, block.ring);
      const trigger = watched.detector?.step(block.lastSlot);
      if (trigger) this.#take(watched, trigger, events);
    }
    if (this.#open.length > 0) this.#follow(events);
    return events;
  }

  /** For the time when no feed sends: `nowUs` is the newest tag that could be here by now. */
  tick(nowUs: number): DisturbanceEvent[] {
    if (this.#open.length === 0 || nowUs <= this.#newestUs) return [];
    this.#newestUs = nowUs;
    const events: DisturbanceEvent[] = [];
    this.#follow(events);
    return events;
  }

  /** The end of a recording: every open disturbance is settled with what there is. */
  finish(): DisturbanceEvent[] {
    return this.tick(this.#newestUs + GIVE_UP_US + 1);
  }

  #bind(watched: Watched, ring: FrameRing): void {
    watched.ring = ring;
    const bound = viewTerminal(watched.terminal, ring);
    watched.view = "view" in bound ? bound.view : undefined;
    watched.detector = watched.view && new OnsetDetector(watched.view);
    if ("problem" in bound) this.#onProblem({ feedId: ring.feedId, terminalId: watched.terminal.id, problem: bound.problem });
  }

  #take(watched: Watched, trigger: Trigger, events: DisturbanceEvent[]): void {
    const same = this.#open.find(
      (o) => Math.abs(o.detectedUs - trigger.timeUs) < SAME_MOMENT_US || o.triggers.has(watched.terminal.id),
    );
    if (same) {
      if (!same.triggers.has(watched.terminal.id)) same.triggers.set(watched.terminal.id, trigger);
      same.detectedUs = Math.min(same.detectedUs, trigger.timeUs);
      return;
    }
    const open: Open = {
      id: `d${Math.round(trigger.timeUs / 1000).toString(36)}`,
      detectedUs: trigger.timeUs,
      triggers: new Map([[watched.terminal.id, trigger]]),
      stage: undefined,
      told: undefined,
      isCleared: false,
      lastTriedUs: 0,
      someRestUs: undefined,
    };
    this.#open.push(open);
    events.push({
      kind: "noticed",
      disturbanceId: open.id,
      dataTimeUs: this.#newestUs,
      onsetUs: Math.round(trigger.timeUs),
      lineIds: [watched.line.id],
      seenBy: [watched.terminal.id],
    });
  }

  #follow(events: DisturbanceEvent[]): void {
    for (const open of [...this.#open]) {
      const isOver = this.#followOne(open, events);
      if (!isOver) continue;
      events.push({ kind: "ended", disturbanceId: open.id, dataTimeUs: this.#newestUs });
      this.#open.splice(this.#open.indexOf(open), 1);
    }
  }

  /** Returns true when nothing more will come. */
  #followOne(open: Open, events: DisturbanceEvent[]): boolean {
    const sinceUs = this.#newestUs - open.detectedUs;
    const shortest = Math.min(...[...open.triggers.keys()].map((id) => this.#byTerminal.get(id)!.ring!.periodUs));
    if (this.#newestUs - open.lastTriedUs < shortest) return false;
    open.lastTriedUs = this.#newestUs;
    const isDeadline = sinceUs > GIVE_UP_US;
    const lines = this.#candidates(open);
    const rest = this.#restOf(open, lines);
    const now = this.#newestUs;
    open.someRestUs = rest.kind === "moving" && sinceUs < STILL_ON_US ? undefined : (open.someRestUs ?? now);
    const isComplete = rest.kind === "all" && rest.reachedUs >= rest.sinceUs + SETTLE_US;
    const isOverdue = open.someRestUs !== undefined && now - open.someRestUs >= OTHER_END_US;
    const isFinal = isComplete || isOverdue || isDeadline;
    const stage: LocateStage = isFinal ? "settled" : rest.kind === "all" ? "refined" : "provisional";
    // The settled answer rests on frames up to a time that the frames themselves give, so that a replay comes to the same.
    const untilUs = isComplete ? rest.sinceUs + SETTLE_US : now;
    if (open.stage === stage || (open.stage === "refined" && stage === "provisional")) return isDeadline;

    const findings = lines.map((line) => ({ line, finding: locate(this.#disturbanceOf(open, line, stage, untilUs)) }));
    const located = findings.flatMap(({ line, finding }) => (finding.kind === "located" ? [{ line, finding }] : []));
    const best = located.sort((p, q) => strength(q.finding) - strength(p.finding))[0];
    if (best) this.#tell(open, best.line, best.finding, stage, events);
    else if (isFinal) {
      const elsewhere = findings.find(({ finding }) => finding.kind === "elsewhere")?.finding;
      const reason = elsewhere?.kind === "elsewhere" ? elsewhere.reason : "too few frames to say what it was";
      const onsetUs = elsewhere?.kind === "elsewhere" ? this.#toUs(open, elsewhere.onsetS) : open.detectedUs;
      events.push({ kind: "outside", disturbanceId: open.id, dataTimeUs: this.#newestUs, onsetUs, reason });
    }
    return isFinal && (isDeadline || open.isCleared || !best);
  }

  #tell(
    open: Open,
    line: Line,
    finding: Extract<Finding, { kind: "located" }>,
    stage: LocateStage,
    events: DisturbanceEvent[],
  ): void {
    open.stage = stage;
    const clearedUs = finding.clearingS === Number.POSITIVE_INFINITY ? null : this.#toUs(open, finding.clearingS);
    const location = { ...finding.location, reasons: [...finding.location.reasons, ...whatChanged(open.told, finding.location)] };
    open.told = { lineId: line.id, stretch: location.stretchKm };
    if (clearedUs !== null && !open.isCleared) {
      open.isCleared = true;
      const noCurrentAt = this.#withoutCurrent(open, line);
      events.push({
        kind: "cleared",
        disturbanceId: open.id,
        dataTimeUs: this.#newestUs,
        lineId: line.id,
        clearedUs,
        noCurrentAt,
      });
    }
    events.push({
      kind: "located",
      disturbanceId: open.id,
      dataTimeUs: this.#newestUs,
      stage,
      onsetUs: this.#toUs(open, finding.onsetS),
      clearedUs,
      location,
    });
  }

  /** Lines of which a terminal saw it, largest jump first. */
  #candidates(open: Open): Line[] {
    const jumps = new Map<Line, number>();
    for (const [id, trigger] of open.triggers) {
      const { line } = this.#byTerminal.get(id)!;
      jumps.set(line, Math.max(jumps.get(line) ?? 0, trigger.jumpAmp));
    }
    return [...jumps].sort((p, q) => q[1] - p[1]).map(([line]) => line);
  }

  #terminalsOf(line: Line): Watched[] {
    return line.terminals.flatMap((t) => this.#byTerminal.get(t.id) ?? []).filter((w) => w.view);
  }

  /** Whether the phasors of the likeliest line's terminals are at rest: all, some or none; since when the last of them, and how far all have come. */
  #restOf(
    open: Open,
    lines: readonly Line[],
  ): { readonly kind: "all" | "some" | "moving"; readonly sinceUs: number; readonly reachedUs: number } {
    const terminals = lines.slice(0, 1).flatMap((line) => this.#terminalsOf(line));
    const ends = terminals.flatMap((w) => this.#endOf(open, w, this.#newestUs) ?? []);
    const resting = ends.flatMap((end) => {
      const since = end.progress.restsSince;
      return since === undefined ? [] : [end.capture.timesS[since]!];
    });
    const kind = resting.length === 0 ? "moving" : resting.length === terminals.length ? "all" : "some";
    return {
      kind,
      sinceUs: this.#toUs(open, Math.max(...resting, 0)),
      reachedUs: this.#toUs(open, Math.min(...ends.map((e) => e.capture.timesS.at(-1)!))),
    };
  }

  #epochUs(open: Open): number {
    return Math.floor((open.detectedUs - BEFORE_US) / 1e6) * 1e6;
  }
  #toUs(open: Open, seconds: number): number {
    return Math.round(this.#epochUs(open) + seconds * 1e6);
  }

  #endOf(open: Open, watched: Watched, untilUs: number): CapturedEnd | undefined {
    if (!watched.view) return undefined;
    const epochUs = this.#epochUs(open);
    const disturbedUs = open.triggers.get(watched.terminal.id)?.timeUs ?? open.detectedUs;
    const capture = captureTerminal(watched.view, watched.nominalHz, epochUs, disturbedUs - BEFORE_US, untilUs, disturbedUs);
    if (capture.timesS.length < 6) return undefined;
    const disturbedS = (disturbedUs - epochUs) / 1e6;
    return { capture, window: watched.window, disturbedS, progress: progressOf(capture, disturbedS) };
  }

  #disturbanceOf(open: Open, line: Line, stage: LocateStage, untilUs: number) {
    const ends = this.#terminalsOf(line).flatMap((w) => this.#endOf(open, w, untilUs) ?? []);
    // At the deadline an end that has not come to rest (or has stopped sending) is left out, if another has.
    const rested = ends.filter((e) => e.progress.restsSince !== undefined);
    const stationName = (id: string) => this.#network.stations.find((s) => s.id === id)?.name ?? id;
    return { line, ends: stage === "settled" && rested.length > 0 ? rested : ends, stationName, stage };
  }

  /** Stations of the line where no phase carries current in the newest frames. */
  #withoutCurrent(open: Open, line: Line): string[] {
    return this.#terminalsOf(line).flatMap((w) => {
      const end = this.#endOf(open, w, this.#newestUs);
      if (!end) return [];
      const largest = Math.max(...[0, 1, 2].map((phase) => newestCurrentAmp(end.capture, phase)));
      return largest < NO_CURRENT_SHARE * end.progress.peakAmp ? [w.terminal.stationId] : [];
    });
  }
}

/** Two ends before one; then the surer. */
const strength = (finding: Extract<Finding, { kind: "located" }>): number => {
  const { estimates, pieces } = finding.location;
  return Math.max(...estimates.map((e) => e.terminals.length)) - pieces.reduce((s, p) => s + p.highKm - p.lowKm, 0) / 1e4;
};

/** In words, when the new place is not the old one. */
function whatChanged(
  before: Open["told"],
  now: { lineId: string; km: number | null; stretchKm: readonly [number, number] | null },
): string[] {
  if (!before) return [];
  if (before.lineId !== now.lineId) return ["another line than told before"];
  if (now.km === null || !before.stretch) return [];
  const isInside = now.km >= before.stretch[0] && now.km <= before.stretch[1];
  return [
    isInside
      ? "place within the stretch told before"
      : `place outside the stretch told before (${before.stretch[0].toFixed(1)}-${before.stretch[1].toFixed(1)} km)`,
  ];
}
