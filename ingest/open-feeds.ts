/** All feeds of a network, live: one stream of blocks, one of health, one timer. */
import type { Logger } from "pino";
import { BehaviorSubject, type Observable, Subject } from "rxjs";
import type { Network } from "../config/index.ts";
import type { Recorder } from "./recording/recorder.ts";
import type { TcpFeedEvents } from "./tcp-feed.ts";
import { TcpFeed } from "./tcp-feed.ts";
import type { FeedHealth, FrameBlock } from "./types.ts";

const TICK_MS = 250;
/** Counts are told at least this often; a state that changed, at the next tick. */
const TELL_EVERY_TICKS = 4;
/** A defect that repeats is logged once in this time, with its count. */
const LOG_EVERY_US = 60e6;

export interface OpenFeedsOptions {
  readonly log: Logger;
  /** Records every frame as it comes; its maker closes it. */
  readonly recorder?: Recorder;
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
  { log, recorder, now = () => Date.now() * 1000, random = Math.random }: OpenFeedsOptions,
): OpenFeeds {
  const blocks = new Subject<FrameBlock>();
  const health = new BehaviorSubject<readonly FeedHealth[]>([]);
  let isNews = true;
  let ticks = 0;
  const feeds: TcpFeed[] = network.feeds.map((feed) => {
    const feedLog = log.child({ feed: feed.id });
    const writer = recorder?.writerFor(feed.id, (words) => feedLog.error(words));
    return new TcpFeed(
      feed,
      network,
      {
        onBlock: (block) => blocks.next(block),
        onState: () => {
          isNews = true;
        },
        ...(writer ? { onFrame: (bytes: Uint8Array, at: number, size: number) => writer.write(bytes, at, size) } : {}),
        onLog: sparingly(feedLog, now),
      },
      now,
      random,
    );
  });
  const look = () => {
    for (const feed of feeds) feed.tick();
    if (!isNews && ticks++ % TELL_EVERY_TICKS !== 0) return;
    isNews = false;
    health.next(feeds.map((feed) => feed.health()));
  };
  look();
  const timer = setInterval(look, TICK_MS);
  return {
    blocks: blocks.asObservable(),
    health: health.asObservable(),
    async stop() {
      clearInterval(timer);
      await Promise.all(feeds.map((feed) => feed.stop()));
      blocks.complete();
      health.complete();
    },
  };
}

/** Logs each code at once the first time, then at most once a minute with how many alike there were: a feed that flaps fills no log. */
function sparingly(log: Logger, now: () => number): TcpFeedEvents["onLog"] {
  const seen = new Map<string, { sinceUs: number; more: number }>();
  return (level, words, code) => {
    const last = seen.get(code);
    if (last && now() - last.sinceUs < LOG_EVERY_US) {
      last.more++;
      return;
    }
    const alike = last && last.more > 0 ? { alike: last.more } : {};
    log[level](code === "live" ? alike : { defect: code, ...alike }, words);
    seen.set(code, { sinceUs: now(), more: 0 });
  };
}
