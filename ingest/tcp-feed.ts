/**
 * A unit that is called over TCP: connect, stop the data, ask for the configuration, start the data; start again when it breaks. One object a feed; a
 * tick from outside looks at its time-outs, so that two thousand feeds need one timer.
 */
import { connect, type Socket } from "node:net";
import type { FeedConfig, Network } from "../config/index.ts";
import { encodeCommand, type FrameDefect } from "./c37118/index.ts";
import { bindingProblems, StreamReader } from "./stream-reader.ts";
import type { FeedHealth, FeedState, FrameBlock } from "./types.ts";

/** All in µs of the injected clock. */
const CONNECT_TIMEOUT_US = 5e6;
const CONFIGURATION_TIMEOUT_US = 5e6;
/** Frames that are due but did not come for this long make a feed stale; twice as long and the connection is given up. */
const STALE_US = 2e6;
const DEAD_US = 10e6;
const FIRST_RETRY_US = 0.25e6;
const LONGEST_RETRY_US = 15e6;

export interface TcpFeedEvents {
  readonly onBlock: (block: FrameBlock) => void;
  readonly onFrame?: (bytes: Uint8Array, at: number, size: number) => void;
  /** The state or its reason changed. */
  readonly onState: () => void;
  readonly onLog: (level: "info" | "warn", words: string, detail?: { code: FrameDefect }) => void;
}

export class TcpFeed {
  readonly #feed: FeedConfig;
  readonly #network: Network;
  readonly #now: () => number;
  readonly #random: () => number;
  readonly #events: TcpFeedEvents;
  readonly #reader: StreamReader;
  #socket: Socket | undefined;
  #state: FeedState = "connecting";
  #reason = "not yet connected";
  /** A reason that outlives reconnecting: wrong IDCODE, channels not found. */
  #misfit = "";
  #sinceUs: number;
  #nextTryUs = 0;
  #tries = 0;
  #newestArrivedUs: number | undefined;
  #first = -1;
  #last = -1;
  #isStopped = false;

  constructor(feed: FeedConfig, network: Network, events: TcpFeedEvents, now: () => number, random: () => number) {
    this.#feed = feed;
    this.#network = network;
    this.#events = events;
    this.#now = now;
    this.#random = random;
    this.#sinceUs = now();
    this.#reader = new StreamReader(feed, {
      ...(events.onFrame ? { onFrame: events.onFrame } : {}),
      onConfiguration: () => this.#configured(),
      onRow: (slot) => {
        if (this.#first < 0 || slot < this.#first) this.#first = slot;
        if (slot > this.#last) this.#last = slot;
      },
      onDefect: (code, words) => {
        if (code === "wrong-id-code") this.#misfit = words;
        this.#events.onLog("warn", words, { code });
      },
    });
  }

  /** Looks at time-outs and retries; call a few times a second. */
  tick(): void {
    if (this.#isStopped) return;
    const now = this.#now();
    if (!this.#socket) {
      if (now >= this.#nextTryUs) this.#connect();
      return;
    }
    const periodUs = this.#reader.ring?.periodUs ?? 1e6 / this.#feed.reportingRateHz;
    if (this.#state === "connecting" && now - this.#sinceUs > CONNECT_TIMEOUT_US)
      this.#drop(`no answer from ${this.#feed.address} within ${CONNECT_TIMEOUT_US / 1e6} s`);
    else if (this.#state === "configuring" && now - this.#sinceUs > CONFIGURATION_TIMEOUT_US)
      this.#drop("connected, but no configuration frame came: is it a C37.118.2 unit that answers commands?");
    else if (
      this.#newestArrivedUs !== undefined &&
      (this.#state === "live" || this.#state === "stale" || this.#state === "refused")
    ) {
      const silentUs = now - Math.max(this.#newestArrivedUs, this.#sinceUs);
      if (silentUs > Math.max(DEAD_US, 4 * periodUs))
        this.#drop(`no frame for ${Math.round(silentUs / 1e6)} s: connection given up`);
      else if (silentUs > Math.max(STALE_US, 3 * periodUs) && this.#state === "live")
        this.#enter("stale", "connected, but no frame comes");
    }
  }

  health(): FeedHealth {
    const { ring, frames, missingFrames, defects } = this.#reader;
    const row = ring && ring.newestSlot >= 0 ? ring.rowOf(ring.newestSlot) : -1;
    return {
      feedId: this.#feed.id,
      state: this.#state,
      reason: this.#state === "live" ? this.#misfit : this.#reason,
      frames,
      missingFrames,
      defects: Object.fromEntries(Object.entries(defects).filter(([, count]) => count > 0)),
      ...(ring && row >= 0 ? { newestTimeUs: ring.timeUs[row]! } : {}),
      ...(this.#newestArrivedUs === undefined ? {} : { newestArrivedUs: this.#newestArrivedUs }),
    };
  }

  /** May be called twice and at any moment. */
  stop(): void {
    this.#isStopped = true;
    const socket = this.#socket;
    this.#socket = undefined;
    if (!socket) return;
    socket.removeAllListeners("data");
    if (socket.writable) socket.end(encodeCommand(this.#feed.idCode, "data-off", this.#now()));
    socket.destroySoon();
  }

  #connect(): void {
    const { hostname, port } = new URL(this.#feed.address);
    const socket = connect({ host: hostname.replace(/^\[|\]$/g, ""), port: Number(port) });
    this.#socket = socket;
    socket.setNoDelay(true);
    this.#enter("connecting", `connecting to ${this.#feed.address}`);
    socket.on("connect", () => {
      this.#enter("configuring", "connected, waiting for the configuration frame");
      socket.write(encodeCommand(this.#feed.idCode, "data-off", this.#now()));
      socket.write(encodeCommand(this.#feed.idCode, "send-configuration-2", this.#now()));
    });
    socket.on("data", (chunk) => this.#read(chunk));
    socket.on("error", (error) => {
      if (this.#socket === socket) this.#drop(`${this.#feed.address} cannot be reached: ${wordsOf(error)}`);
    });
    socket.on("close", () => {
      if (this.#socket === socket) this.#drop("the unit closed the connection");
    });
  }

  #read(chunk: Buffer): void {
    const arrivedUs = this.#now();
    this.#first = -1;
    this.#last = -1;
    const misfitBefore = this.#misfit;
    this.#reader.push(chunk, arrivedUs);
    if (this.#misfit !== misfitBefore && this.#state === "configuring") this.#enter("refused", this.#misfit);
    if (this.#last < 0) return;
    this.#newestArrivedUs = arrivedUs;
    if (this.#state === "stale") this.#enter("live", "");
    this.#events.onBlock({ feedId: this.#feed.id, ring: this.#reader.ring!, firstSlot: this.#first, lastSlot: this.#last });
  }

  #configured(): void {
    const config = this.#reader.config!;
    const { problems, terminals } = bindingProblems(this.#network, this.#feed.id, config);
    this.#misfit = problems.join("; ");
    if (Math.abs(config.reportingRateHz - this.#feed.reportingRateHz) > 1e-6) {
      const words = `the stream sends ${config.reportingRateHz} frames/s, the network file says ${this.#feed.reportingRateHz}: the measuring window is assumed for the file's rate`;
      this.#misfit = [this.#misfit, words].filter((x) => x).join("; ");
    }
    if (this.#misfit) this.#events.onLog("warn", this.#misfit);
    this.#tries = 0;
    this.#newestArrivedUs = this.#now();
    if (terminals > 0 && problems.length === terminals) this.#enter("refused", this.#misfit);
    else this.#enter("live", "");
    this.#socket?.write(encodeCommand(this.#feed.idCode, "data-on", this.#now()));
  }

  #enter(state: FeedState, reason: string): void {
    const isNews = state !== this.#state || reason !== this.#reason;
    this.#state = state;
    this.#reason = reason;
    this.#sinceUs = this.#now();
    if (isNews) this.#events.onState();
    if (isNews && state !== "connecting" && state !== "configuring")
      this.#events.onLog(state === "live" ? "info" : "warn", state === "live" ? "live" : reason);
  }

  #drop(reason: string): void {
    const socket = this.#socket;
    this.#socket = undefined;
    socket?.destroy();
    this.#reader.end();
    this.#enter("stale", reason);
    const waitUs = Math.min(LONGEST_RETRY_US, FIRST_RETRY_US * 2 ** this.#tries);
    this.#tries = Math.min(this.#tries + 1, 10);
    this.#nextTryUs = this.#now() + waitUs * (0.5 + this.#random() / 2);
  }
}

const wordsOf = (error: NodeJS.ErrnoException): string =>
  ({
    ECONNREFUSED: "connection refused (is the unit's server running, is the port right?)",
    ETIMEDOUT: "no answer",
    ENOTFOUND: "no such host",
    EHOSTUNREACH: "no route to the host",
    ECONNRESET: "connection reset by the unit",
  })[error.code ?? ""] ?? error.message;
