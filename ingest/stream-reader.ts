/**
 * From a feed's bytes to rows: cuts frames, checks IDCODE and configuration, fills the ring, counts every defect. Knows no socket and no file: TCP feeds
 * and replayed recordings use the same reader.
 */
import { bindTerminal, type FeedConfig, type Network, type Terminal } from "../config/index.ts";
import {
  BadConfiguration,
  Config3Assembler,
  dataFrameBytes,
  decodeConfig,
  decodeConfig3,
  type FrameDefect,
  Framer,
  frameDefects,
  type StreamConfig,
  typeOf,
} from "./c37118/index.ts";
import { ringProblem, WritableRing } from "./ring.ts";

/** A CFG-2 of the same stream may be this large however small its data frames are. */
const LARGEST_BEFORE_CONFIGURATION = 65_535;

export interface StreamEvents {
  /** Whole frame as received, for recordings; valid during the call only. */
  readonly onFrame?: (bytes: Uint8Array, at: number, size: number) => void;
  /** A usable configuration came: the first, a changed one, or the same again (after a reconnection). */
  readonly onConfiguration: (config: StreamConfig) => void;
  /** A row was written. */
  readonly onRow: (slot: number) => void;
  /** In words, for the log and the operator. */
  readonly onDefect: (code: FrameDefect, words: string) => void;
}

export class StreamReader {
  readonly feed: FeedConfig;
  readonly defects: Record<FrameDefect, number> = Object.fromEntries(frameDefects.map((d) => [d, 0])) as Record<
    FrameDefect,
    number
  >;
  frames = 0;
  missingFrames = 0;
  ring: WritableRing | undefined;
  config: StreamConfig | undefined;
  /** Bytes skipped since the last whole frame. */
  #skippedBytes = 0;
  readonly #framer: Framer;
  readonly #events: StreamEvents;
  #configurationBytes: Buffer | undefined;
  /** Which of the two the present stream is read by: a unit that sends both would else change its names to and fro. */
  #configuredBy: "configuration-2" | "configuration-3" | undefined;
  readonly #assembler = new Config3Assembler();
  #arrivedUs: number | undefined;
  #viewed: { bytes: Uint8Array; view: DataView } | undefined;

  constructor(feed: FeedConfig, events: StreamEvents) {
    this.feed = feed;
    this.#events = events;
    this.#framer = new Framer({
      frame: (bytes, at, size) => this.#take(bytes, at, size),
      defect: (code, offset, skipped) => {
        this.#skippedBytes += skipped;
        this.#defect(code, `${skipped} byte${skipped === 1 ? "" : "s"} skipped at byte ${offset} of the stream`);
      },
    });
    this.#framer.largestFrameBytes = LARGEST_BEFORE_CONFIGURATION;
  }

  /** @param arrivedUs  µs since 1970 UTC; left out for recordings, where the tag's time stands for it */
  push(chunk: Uint8Array, arrivedUs?: number): void {
    this.#arrivedUs = arrivedUs;
    this.#viewed = undefined;
    this.#framer.push(chunk);
  }

  /** The connection or file ended; the next bytes begin a new one, whose configuration may be larger. */
  end(): void {
    this.#framer.end();
    this.#configuredBy = undefined;
    this.#framer.largestFrameBytes = LARGEST_BEFORE_CONFIGURATION;
    this.#skippedBytes = 0;
  }

  /** More bytes than two of the largest frames have gone by without one: this is no such stream. */
  get isHopeless(): boolean {
    return this.#skippedBytes > 2 * this.#framer.largestFrameBytes;
  }

  #defect(code: FrameDefect, words: string): void {
    this.defects[code]++;
    this.#events.onDefect(code, words);
  }

  #take(bytes: Uint8Array, at: number, size: number): void {
    this.#skippedBytes = 0;
    const type = typeOf(bytes[at + 1]!);
    const idCode = (bytes[at + 4]! << 8) | bytes[at + 5]!;
    if (idCode !== this.feed.idCode) {
      this.#defect(
        "wrong-id-code",
        `expected IDCODE ${this.feed.idCode}, found ${idCode}: check the feed's idCode in the network file`,
      );
      return;
    }
    if (type === "data") this.#takeData(bytes, at, size);
    else if ((type === "configuration-2" || type === "configuration-3") && !this.#takeConfiguration(type, bytes, at, size))
      return;
    // Pieces of configuration 3 before the last one, too: a recording needs them.
    if (type === "configuration-3" && !this.config) this.#events.onFrame?.(bytes, at, size);
    // Also a frame that came twice or late: a replay then meets what the live feed met.
    if (this.config) this.#events.onFrame?.(bytes, at, size);
  }

  #takeConfiguration(type: "configuration-2" | "configuration-3", bytes: Uint8Array, at: number, size: number): boolean {
    if (this.#configuredBy !== undefined && this.#configuredBy !== type) return true;
    let said: Buffer | undefined;
    let config: StreamConfig;
    try {
      // The frame's own time and CRC differ each time it is sent; what it says is between them.
      said =
        type === "configuration-2" ? Buffer.from(bytes.subarray(at + 14, at + size - 2)) : this.#assembler.take(bytes, at, size);
      if (said === undefined) return true;
      if (this.config && this.#configurationBytes?.equals(said)) {
        this.#configuredBy = type;
        this.#limitFrames(size);
        this.#events.onConfiguration(this.config);
        return true;
      }
      config = type === "configuration-2" ? decodeConfig(bytes, at, size) : decodeConfig3(said, this.feed.idCode);
      const problem = ringProblem(config);
      if (problem) throw new BadConfiguration(problem);
    } catch (error) {
      if (!(error instanceof BadConfiguration)) throw error;
      this.#defect("bad-configuration", `configuration frame cannot be used: ${error.message}`);
      return false;
    }
    this.config = config;
    this.#configuredBy = type;
    this.#configurationBytes = said;
    this.ring = new WritableRing(this.feed.id, this.config);
    this.#limitFrames(type === "configuration-2" ? size : LARGEST_BEFORE_CONFIGURATION);
    this.#events.onConfiguration(this.config);
    return true;
  }

  /** A false start cannot hold the queue for long: nothing larger than what this stream sends is waited for. */
  #limitFrames(configurationBytes: number): void {
    this.#framer.largestFrameBytes = Math.max(dataFrameBytes(this.config!), 2 * configurationBytes, 1024);
  }

  #takeData(bytes: Uint8Array, at: number, size: number): void {
    const { ring } = this;
    if (!ring) {
      this.#defect("no-configuration-yet", "data frame before the first configuration frame");
      return;
    }
    if (size !== ring.plan.frameBytes) {
      this.#configuredBy = undefined; // whichever configuration comes next is believed
      this.#defect("size-unlike-configuration", `data frame of ${size} bytes, the configuration makes ${ring.plan.frameBytes}`);
      return;
    }
    if (this.#viewed?.bytes !== bytes)
      this.#viewed = { bytes, view: new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength) };
    const before = ring.newestSlot;
    const placement = ring.put(this.#viewed.view, at, this.#arrivedUs);
    if (placement === "doubtful-time")
      this.#defect("time-out-of-bounds", `time tag of slot ${ring.lastSlot} is far from the last one`);
    else if (placement === "duplicate") this.#defect("duplicate", "frame came twice");
    else if (placement === "leap-second") this.#defect("leap-second", "frame of a leap second, or the first after it, left out");
    else if (placement === "too-late") this.#defect("late", "frame came after its row was given to a newer one");
    if (placement !== "new") return;
    this.frames++;
    if (before >= 0 && ring.newestSlot >= before) {
      if (ring.lastSlot > before) this.missingFrames += ring.lastSlot - before - 1;
      else this.missingFrames = Math.max(0, this.missingFrames - 1); // a late one fell into its gap
    }
    this.#events.onRow(ring.lastSlot);
  }
}

/** In words, which of the feed's terminals do not find their channels in the stream; empty when all do. */
export function bindingProblems(
  network: Network,
  feedId: string,
  config: StreamConfig,
): { readonly problems: readonly string[]; readonly terminals: number } {
  const columns = config.units.flatMap((unit) =>
    unit.phasors.map((p, indexInUnit) => ({ unitIdCode: unit.idCode, name: p.name, indexInUnit })),
  );
  const terminals = network.lines
    .flatMap((line) => line.terminals)
    .filter((t): t is Terminal & { measured: NonNullable<Terminal["measured"]> } => t.measured?.feedId === feedId);
  const problems = terminals.flatMap((t) => {
    const bound = bindTerminal(columns, t.measured);
    return "problem" in bound ? [`${t.id}: ${bound.problem}`] : [];
  });
  return { problems, terminals: terminals.length };
}
