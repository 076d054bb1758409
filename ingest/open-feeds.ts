/** All feeds of a network, live: one stream of blocks, one of health, one timer. */
import type { Logger } from "pino";
import { BehaviorSubject, type Observable, Subject } from "rxjs";
import type { Network } from "../config/index.ts";
import { RecordingWriter } from "./recording-writer.ts";
import { TcpFeed } from "./tcp-feed.ts";
import type { FeedHealth, FrameBlock } from "./types.ts";

const TICK_MS = 250;
/** A defect that repeats is logged once in this time, with its count. */
const LOG_EVERY_US = 60e6;

export interface OpenFeedsOptions {
  readonly log: Logger;
  /** Folder for raw recordings, one file a feed; nothing is recorded without it. */
  readonly recordTo?: string;
  /** µs since 1970 UTC. */
  readonly now?: () => number;
  /** 0..1, for the jitter of retries. */
  readonly random?: () => number;
}

export interface OpenFeeds {
  readonly blocks: Observable<FrameBlock>;
  /** Present health on subscription, then a few times a second. */
  readonly health: Observable<readonly FeedHealth[]>;
  /** May be called twice. Leaves no socket and no timer. */
  stop(): Promise<void>;
}

export function openFeeds(
  network: Network,
  { log, recordTo, now = () => Date.now() * 1000, random = Math.random }: OpenFeedsOptions,
): OpenFeeds {
  const blocks = new Subject<FrameBlock>();
  const writers: RecordingWriter[] = [];
  const health = new BehaviorSubject<readonly FeedHealth[]>([]);
  let isTelling = false;
  const tell = () => {
    isTelling = false;
    health.next(feeds.map((feed) => feed.health()));
  };
  const feeds: TcpFeed[] = network.feeds.map((feed) => {
    const writer = recordTo === undefined ? undefined : new RecordingWriter(recordTo, feed.id);
    if (writer) writers.push(writer);
    return new TcpFeed(
      feed,
      network,
      {
        onBlock: (block) => blocks.next(block),
        onState: () => {
          // However many feeds change in one turn, it is told once.
          if (!isTelling) queueMicrotask(tell);
          isTelling = true;
        },
        ...(writer ? { onFrame: (bytes: Uint8Array, at: number, size: number) => writer.write(bytes, at, size) } : {}),
        onLog: sparingly(log.child({ feed: feed.id }), now),
      },
      now,
      random,
    );
  });
  const look = () => {
    for (const feed of feeds) feed.tick();
    tell();
  };
  look();
  const timer = setInterval(look, TICK_MS);
  return {
    blocks: blocks.asObservable(),
    health: health.asObservable(),
    async stop() {
      clearInterval(timer);
      for (const feed of feeds) feed.stop();
      blocks.complete();
      health.complete();
      await Promise.all(writers.splice(0).map((writer) => writer.close()));
    },
  };
}

/** Logs a state at once; a defect's code at once the first time, then at most once a minute with how many there were. */
function sparingly(log: Logger, now: () => number) {
  const seen = new Map<string, { sinceUs: number; more: number }>();
  return (level: "info" | "warn", words: string, detail?: { code: string }) => {
    if (!detail) {
      log[level](words);
      return;
    }
    const last = seen.get(detail.code);
    if (last && now() - last.sinceUs < LOG_EVERY_US) {
      last.more++;
      return;
    }
    log[level]({ defect: detail.code, ...(last && last.more > 0 ? { alike: last.more } : {}) }, words);
    seen.set(detail.code, { sinceUs: now(), more: 0 });
  };
}
