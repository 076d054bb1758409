/**
 * A unit that is called over TCP: connect, stop the data, ask for the configuration, start the data; start again when it breaks. One object a feed; a
 * tick from outside looks at its time-outs, so that two thousand feeds need one timer.
 *
 * What the connection does and what people are shown are kept apart: a feed that failed stays "stale" or "refused" with its reason while it is tried
 * again, until its configuration has come. Otherwise its reason would flicker away at each try.
 */
import { connect, type Socket } from "node:net";
import { type FeedConfig, type Network, parseAddress } from "../config/index.ts";
import { encodeCommand, type FrameDefect } from "./c37118/index.ts";
import type { FeedTrouble } from "./feed-trouble.ts";
import { bindingProblems, StreamReader } from "./stream-reader.ts";
import type { FeedHealth, FeedState, FrameBlock } from "./types.ts";

/** All in µs of the injected clock. */
const CONNECT_TIMEOUT_US = 5e6;
const CONFIGURATION_TIMEOUT_US = 5e6;
/** Frames that are due but did not come for this long make a feed stale; after `DEAD_US` the connection is given up. */
const STALE_US = 2e6;
const DEAD_US = 10e6;
const FIRST_RETRY_US = 0.25e6;
const LONGEST_RETRY_US = 15e6;
/** Live for this long: the next loss is a new one, and is retried quickly again. */
const SETTLED_US = 10e6;
/** What a stopping feed waits for its last command to leave. */
const FAREWELL_MS = 250;

/** Every feed's bytes land here and are used up before the next read: no memory is taken for each. */
const landing = new Uint8Array(64 * 1024);

export interface TcpFeedEvents {
  readonly onBlock: (block: FrameBlock) => void;
  readonly onFrame?: (bytes: Uint8Array, at: number, size: number) => void;
  /** The state or its reason changed. */
  readonly onState: () => void;
  readonly onLog: (level: "info" | "warn", words: string, code: FeedTrouble | FrameDefect | "live") => void;
}

/** What the connection waits for. */
type Phase = "nothing" | "connection" | "configuration" | "frames";

export class TcpFeed {
  readonly #feed: FeedConfig;
  readonly #network: Network;
  readonly #now: () => number;
  readonly #random: () => number;
  readonly #events: TcpFeedEvents;
  readonly #reader: StreamReader;
  #socket: Socket | undefined;
  #phase: Phase = "nothing";
  #phaseSinceUs: number;
  #state: FeedState = "connecting";
  #reason = "not yet connected";
  /** Frames of another IDCODE since the last good one, in words. */
  #strangers = "";
  /** What works less well although frames come. */
  #remark = "";
  #hasFailed = false;
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
    this.#phaseSinceUs = now();
    this.#reader = new StreamReader(feed, {
      ...(events.onFrame ? { onFrame: events.onFrame } : {}),
      onConfiguration: () => this.#configured(),
      onRow: (slot) => {
        if (this.#first < 0 || slot < this.#first) this.#first = slot;
        if (slot > this.#last) this.#last = slot;
      },
      onDefect: (code, words) => {
        if (code === "wrong-id-code") this.#strangers = words;
        this.#events.onLog("warn", words, code);
      },
    });
  }

  /** Looks at time-outs and retries; call a few times a second. */
  tick(): void {
    if (this.#isStopped) return;
    const now = this.#now();
    const phaseUs = now - this.#phaseSinceUs;
    switch (this.#phase) {
      case "nothing":
        if (now >= this.#nextTryUs) this.#connect();
        return;
      case "connection":
        if (phaseUs > CONNECT_TIMEOUT_US)
          this.#drop("no-answer", `no answer from ${this.#feed.address} within ${CONNECT_TIMEOUT_US / 1e6} s`);
        return;
      case "configuration":
        if (phaseUs <= CONFIGURATION_TIMEOUT_US) return;
        if (this.#strangers) this.#drop("wrong-id-code", this.#strangers, "refused");
        else
          this.#drop(
            "no-configuration",
            "connected, but no configuration frame came: is it a C37.118.2 unit that answers commands?",
          );
        return;
      default:
        this.#lookForSilence(now, phaseUs);
    }
  }

  health(): FeedHealth {
    const { ring, frames, missingFrames, defects } = this.#reader;
    const row = ring && ring.newestSlot >= 0 ? ring.rowOf(ring.newestSlot) : -1;
    return {
      feedId: this.#feed.id,
      state: this.#state,
      reason: this.#state === "live" ? this.#remark : this.#reason,
      frames,
      missingFrames,
      defects: Object.fromEntries(Object.entries(defects).filter(([, count]) => count > 0)),
      ...(ring && row >= 0 ? { newestTimeUs: ring.timeUs[row]! } : {}),
      ...(this.#newestArrivedUs === undefined ? {} : { newestArrivedUs: this.#newestArrivedUs }),
    };
  }

  /** May be called twice and at any moment. Resolves when the socket is closed. */
  stop(): Promise<void> {
    this.#isStopped = true;
    const socket = this.#socket;
    this.#socket = undefined;
    if (!socket) return Promise.resolve();
    socket.resume();
    if (socket.connecting) socket.destroy();
    else socket.end(encodeCommand(this.#feed.idCode, "data-off", this.#now()));
    return new Promise((done) => {
      const late = setTimeout(() => socket.destroy(), FAREWELL_MS);
      socket.once("finish", () => socket.destroy());
      socket.once("close", () => {
        clearTimeout(late);
        done();
      });
    });
  }

  #connect(): void {
    const address = parseAddress(this.#feed.address);
    if (!address) {
      this.#drop("bad-address", `expected an address such as tcp://10.1.2.3:4712, found ${this.#feed.address}`, "refused");
      this.#nextTryUs = Number.POSITIVE_INFINITY;
      return;
    }
    const socket = connect({
      ...address,
      onread: {
        buffer: landing,
        callback: (size, bytes) => {
          if (this.#socket === socket) this.#read(bytes.subarray(0, size));
          return true;
        },
      },
    });
    this.#socket = socket;
    socket.setNoDelay(true);
    this.#await("connection", "connecting", `connecting to ${this.#feed.address}`);
    socket.on("connect", () => {
      if (this.#socket !== socket) return;
      this.#await("configuration", "configuring", "connected, waiting for the configuration frame");
      socket.write(encodeCommand(this.#feed.idCode, "data-off", this.#now()));
      socket.write(encodeCommand(this.#feed.idCode, "send-configuration-2", this.#now()));
    });
    socket.on("error", (error) => {
      if (this.#socket === socket) this.#drop("unreachable", `${this.#feed.address} cannot be reached: ${wordsOf(error)}`);
    });
    socket.on("close", () => {
      if (this.#socket === socket) this.#drop("closed", "the unit closed the connection");
    });
  }

  #read(chunk: Uint8Array): void {
    const arrivedUs = this.#now();
    this.#first = -1;
    this.#last = -1;
    this.#reader.push(chunk, arrivedUs);
    if (this.#reader.isHopeless) {
      this.#drop("not-synchrophasor", `${this.#feed.address} sends bytes in which no C37.118.2 frame can be found`);
      return;
    }
    if (this.#strangers && this.#phase === "configuration") this.#show("refused", this.#strangers, "wrong-id-code");
    if (this.#last < 0) return;
    this.#newestArrivedUs = arrivedUs;
    this.#strangers = "";
    if (this.#state === "stale") this.#show("live", "", "live");
    this.#events.onBlock({ feedId: this.#feed.id, ring: this.#reader.ring!, firstSlot: this.#first, lastSlot: this.#last });
  }

  #configured(): void {
    const config = this.#reader.config!;
    const { problems, terminals } = bindingProblems(this.#network, this.#feed.id, config);
    const remarks: [FeedTrouble, string][] = problems.map((words) => ["unknown-channel", words]);
    if (Math.abs(config.reportingRateHz - this.#feed.reportingRateHz) > 1e-6) {
      const words = `the stream sends ${config.reportingRateHz} frames/s, the network file says ${this.#feed.reportingRateHz}: the measuring window is assumed for the file's rate`;
      remarks.push(["unlike-rate", words]);
    }
    this.#remark = remarks.map(([, words]) => words).join("; ");
    this.#strangers = "";
    this.#phase = "frames";
    this.#phaseSinceUs = this.#now();
    if (terminals > 0 && problems.length === terminals) this.#show("refused", this.#remark, "unknown-channel");
    else {
      for (const [code, words] of remarks) this.#events.onLog("warn", words, code);
      this.#show("live", "", "live");
    }
    this.#socket?.write(encodeCommand(this.#feed.idCode, "data-on", this.#now()));
  }

  #lookForSilence(now: number, phaseUs: number): void {
    const periodUs = this.#reader.ring?.periodUs ?? 1e6 / this.#feed.reportingRateHz;
    const silentUs = Math.min(phaseUs, now - (this.#newestArrivedUs ?? Number.NEGATIVE_INFINITY));
    if (silentUs > Math.max(DEAD_US, 4 * periodUs)) {
      const seconds = Math.round(silentUs / 1e6);
      if (this.#strangers) this.#drop("wrong-id-code", this.#strangers, "refused");
      else this.#drop("silent", `connected, but no frame came for ${seconds} s: the connection was given up and is tried again`);
    } else if (silentUs > Math.max(STALE_US, 3 * periodUs) && this.#state === "live")
      this.#show("stale", this.#strangers || "connected, but no frame comes", "silent");
    else if (phaseUs > SETTLED_US && this.#state === "live") this.#tries = 0;
  }

  /** A step of connecting; shown only on the first try. */
  #await(phase: Phase, state: FeedState, reason: string): void {
    this.#phase = phase;
    this.#phaseSinceUs = this.#now();
    if (!this.#hasFailed) this.#show(state, reason);
  }

  #show(state: FeedState, reason: string, code?: FeedTrouble | "live"): void {
    const isNews = state !== this.#state || reason !== this.#reason;
    this.#state = state;
    this.#reason = reason;
    this.#hasFailed = state === "stale" || state === "refused";
    if (!isNews) return;
    this.#events.onState();
    if (code) this.#events.onLog(state === "live" ? "info" : "warn", state === "live" ? "live" : reason, code);
  }

  #drop(code: FeedTrouble, reason: string, state: "stale" | "refused" = "stale"): void {
    const socket = this.#socket;
    this.#socket = undefined;
    socket?.destroy();
    this.#reader.end();
    this.#phase = "nothing";
    this.#strangers = "";
    this.#show(state, reason, code);
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
