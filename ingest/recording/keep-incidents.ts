/** Which stretch of the recordings each incident needs, from what is told of it. */
import type { Logger } from "pino";
import type { Recorder } from "./recorder.ts";

/** Undisturbed frames before the onset; enough for any measuring window and a look at the load. */
const BEFORE_US = 10e6;

export interface IncidentNews {
  readonly disturbanceId: string;
  readonly kind: string;
  /** Of the newest frame that this rests on. */
  readonly dataTimeUs: number;
  readonly onsetUs?: number;
}

/**
 * With the first news files are held against the rotation; with a location what is there is kept, so that a crash leaves it; with the end, which
 * comes after the clearing, the whole.
 */
export class IncidentKeeper {
  readonly #recorder: Recorder;
  readonly #log: Logger;
  readonly #onsets = new Map<string, number>();
  #work: Promise<void> = Promise.resolve();

  constructor(recorder: Recorder, log: Logger) {
    this.#recorder = recorder;
    this.#log = log;
  }

  note({ disturbanceId: id, kind, dataTimeUs, onsetUs }: IncidentNews): void {
    const onset = Math.min(onsetUs ?? Number.POSITIVE_INFINITY, this.#onsets.get(id) ?? Number.POSITIVE_INFINITY);
    if (onset === Number.POSITIVE_INFINITY) return;
    this.#onsets.set(id, onset);
    this.#recorder.holdFrom(id, onset - BEFORE_US);
    if (kind !== "located" && kind !== "ended") return;
    if (kind === "ended") this.#onsets.delete(id);
    this.#work = this.#work.then(async () => {
      try {
        const kept = await this.#recorder.keepIncident(id, onset - BEFORE_US, dataTimeUs, kind === "ended");
        if (kind === "ended") this.#log.info({ incident: id, feeds: kept.length }, "recordings of the incident are kept");
      } catch (error) {
        this.#log.error({ incident: id }, `recordings of the incident could not be kept: ${(error as Error).message}`);
      }
    });
  }

  /** Resolves when all that was noted has been kept. */
  settle(): Promise<void> {
    return this.#work;
  }
}
