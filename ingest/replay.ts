/** Recordings (raw files, folders of rotated ones, captures) as blocks of one frame each, all feeds interleaved by their time tags: the same order every time. */
import type { Logger } from "pino";
import type { FeedConfig, Network } from "../config/index.ts";
import { type FrameDefect, Framer, timeUsOf, typeOf } from "./c37118/index.ts";
import { openRecording, type RecordingBytes } from "./recording/read-frames.ts";
import { RecordingError } from "./recording-error.ts";
import { bindingProblems, StreamReader } from "./stream-reader.ts";
import type { FrameBlock } from "./types.ts";

/**
 * @param files  path of each feed's recording
 * @throws RecordingError before the first block when a recording cannot be read, holds another stream, or lacks a terminal's channels
 */
export function* replayRecordings(network: Network, files: ReadonlyMap<string, string>, log: Logger): Generator<FrameBlock> {
  const tracks = [...files].map(([feedId, path]) => {
    const feed = network.feeds.find((f) => f.id === feedId);
    if (!feed)
      throw new RecordingError(
        "unknown-feed",
        `no feed "${feedId}" in the network file; it has ${network.feeds.map((f) => f.id).join(", ")}`,
      );
    return new Track(network, feed, path, log);
  });
  try {
    for (const track of tracks) track.check();
    for (;;) {
      let next: Track | undefined;
      for (const track of tracks) if (track.nextTimeUs < (next?.nextTimeUs ?? Number.POSITIVE_INFINITY)) next = track;
      if (!next) break;
      const block = next.take();
      if (block) yield block;
    }
  } finally {
    for (const track of tracks) track.close();
  }
}

/** One feed's recording: its frames in file order, the next one's time known before it is put into the ring. */
class Track {
  nextTimeUs = Number.POSITIVE_INFINITY;
  readonly #network: Network;
  readonly #path: string;
  readonly #log: Logger;
  readonly #bytes: RecordingBytes;
  readonly #reader: StreamReader;
  readonly #framer: Framer;
  readonly #waiting: Buffer[] = [];
  readonly #defects = new Map<FrameDefect, number>();
  #slot = -1;
  #isAtEnd = false;
  #timeBase = 1_000_000;

  constructor(network: Network, feed: FeedConfig, path: string, log: Logger) {
    this.#network = network;
    this.#path = path;
    this.#log = log;
    const onDefect = (code: FrameDefect, words: string) => {
      const count = (this.#defects.get(code) ?? 0) + 1;
      this.#defects.set(code, count);
      if (count === 1) log.warn({ feed: feed.id, file: path, defect: code }, words);
    };
    this.#bytes = openRecording(path, feed.idCode, onDefect);
    this.#reader = new StreamReader(feed, {
      onConfiguration: (config) => {
        this.#timeBase = config.timeBase;
      },
      onRow: (slot) => {
        this.#slot = slot;
      },
      onDefect,
    });
    this.#framer = new Framer({
      frame: (bytes, at, size) => this.#waiting.push(Buffer.from(bytes.subarray(at, at + size))),
      defect: (code, offset, skipped) => onDefect(code, `${skipped} bytes skipped at byte ${offset}`),
    });
  }

  /** Reads up to the first data frame and sees that the stream is the feed's. */
  check(): void {
    this.#advance();
    const { defects, config, feed } = this.#reader;
    if (!config) {
      const others = [...this.#bytes.otherIdCodes];
      if (others.length > 0 && this.#waiting.length === 0) {
        throw new RecordingError(
          "wrong-id-code",
          `${this.#path}: this capture holds no usable stream of IDCODE ${feed.idCode}, which feed "${feed.id}" has in the network file; it holds ${others.join(", ")}`,
        );
      }
      if (defects["wrong-id-code"] > 0) {
        throw new RecordingError(
          "wrong-id-code",
          `${this.#path}: holds frames of another IDCODE than ${feed.idCode}, which feed "${feed.id}" has in the network file`,
        );
      }
      throw new RecordingError(
        "no-configuration",
        `${this.#path}: no configuration frame at its start: it is no raw recording of C37.118.2 frames, or its beginning is cut off`,
      );
    }
    const { problems } = bindingProblems(this.#network, feed.id, config);
    if (problems.length > 0) throw new RecordingError("unknown-channel", `${this.#path}: ${problems.join("; ")}`);
  }

  /** Puts the next data frame into the ring. */
  take(): FrameBlock | undefined {
    const frame = this.#waiting.shift()!;
    this.#slot = -1;
    this.#reader.push(frame);
    const block =
      this.#slot < 0
        ? undefined
        : { feedId: this.#reader.feed.id, ring: this.#reader.ring!, firstSlot: this.#slot, lastSlot: this.#slot };
    this.#advance();
    return block;
  }

  close(): void {
    this.#bytes.close();
    if (this.#defects.size === 0) return;
    const { feed, frames, missingFrames } = this.#reader;
    const defects = Object.fromEntries(this.#defects);
    this.#log.warn({ feed: feed.id, file: this.#path, frames, missingFrames, defects }, "recording read, with defects");
  }

  /** Feeds everything before the next data frame to the reader, and notes that frame's time. */
  #advance(): void {
    for (;;) {
      const frame = this.#waiting[0];
      if (!frame) {
        if (this.#isAtEnd) {
          this.nextTimeUs = Number.POSITIVE_INFINITY;
          return;
        }
        this.#readMore();
      } else if (typeOf(frame[1]!) === "data" && this.#reader.config) {
        this.nextTimeUs = timeUsOf(frame.readUInt32BE(6), frame.readUInt32BE(10), this.#timeBase);
        return;
      } else this.#reader.push(this.#waiting.shift()!);
    }
  }

  #readMore(): void {
    const chunk = this.#bytes.next();
    if (chunk === undefined) {
      this.#framer.end();
      this.#isAtEnd = true;
    } else this.#framer.push(chunk);
  }
}
