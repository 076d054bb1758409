/** Continuous recording of all feeds, and what is kept of it for each incident whatever the rotation does. */
import { statSync } from "node:fs";
import { join } from "node:path";
import { cutRecording } from "./cut.ts";
import { FeedRecorder, type RotationOptions, usualRotation } from "./feed-recorder.ts";
import { RECORDING_SUFFIX } from "./file-names.ts";

const FLUSH_MS = 1000;
/** Of incidents that never ended, the oldest are let go. */
const MOST_HOLDS = 1000;

export interface KeptRecording {
  readonly feedId: string;
  readonly path: string;
  readonly frames: number;
}

export class Recorder {
  readonly #folder: string;
  readonly #rotation: Required<RotationOptions>;
  readonly #feeds = new Map<string, FeedRecorder>();
  /** Since when files are needed for an incident that is not yet kept. */
  readonly #holds = new Map<string, number>();
  readonly #timer: NodeJS.Timeout;

  /** Files: `FOLDER/feeds/FEED/`, see `FeedRecorder`; incidents: `FOLDER/incidents/ID/FEED.frames`, never deleted here. */
  constructor(folder: string, rotation: RotationOptions = {}) {
    this.#folder = folder;
    this.#rotation = { ...usualRotation, ...rotation };
    this.#timer = setInterval(() => {
      for (const feed of this.#feeds.values()) feed.flush();
    }, FLUSH_MS);
  }

  /** @throws RecordingError when the feed's folder cannot be made */
  writerFor(feedId: string, onTrouble: (words: string) => void): FeedRecorder {
    const earliest = () => Math.min(...this.#holds.values());
    const feed = new FeedRecorder(join(this.#folder, "feeds", feedId), this.#rotation, onTrouble, (endUs) => endUs >= earliest());
    this.#feeds.set(feedId, feed);
    return feed;
  }

  /** No file with frames since then is deleted until `keepIncident` has been called with this id. */
  holdFrom(id: string, fromUs: number): void {
    this.#holds.set(id, fromUs);
    if (this.#holds.size > MOST_HOLDS) this.#holds.delete(this.#holds.keys().next().value!);
  }

  /**
   * Copies that stretch of every feed [µs since 1970 UTC, tags] to where no rotation reaches it; again with the same id replaces it.
   * @param isWhole  nothing more will be asked for: the hold is lifted
   * @throws when it cannot be written; the hold then stays
   */
  async keepIncident(id: string, fromUs: number, toUs: number, isWhole = true): Promise<KeptRecording[]> {
    const kept: KeptRecording[] = [];
    for (const [feedId, feed] of this.#feeds) {
      await feed.settle();
      if (!statSync(feed.folder, { throwIfNoEntry: false })) continue;
      const path = join(this.#folder, "incidents", id.replaceAll(/[^\w.-]/g, "_"), feedId + RECORDING_SUFFIX);
      const frames = cutRecording(feed.folder, fromUs, toUs, path);
      if (frames > 0) kept.push({ feedId, path, frames });
    }
    if (isWhole) this.#holds.delete(id);
    return kept;
  }

  async close(): Promise<void> {
    clearInterval(this.#timer);
    await Promise.all([...this.#feeds.values()].map((feed) => feed.close()));
  }
}
