/**
 * Takes what the outbox holds to one channel: at least once, in order within an incident, first retry after a second, then ever longer. One courier a
 * channel, so that a slow or broken channel delays no other.
 */
import type { SchedulerLike, Subscription } from "rxjs";
import type { IncidentStore, OutboxEntry } from "../store/store.ts";
import type { Channel, Delivery } from "./channel.ts";

const FIRST_RETRY_MS = 1_000;
const LONGEST_RETRY_MS = 60_000;
/** Then an entry is set aside, where people see it: some twenty minutes. */
const MOST_TRIES = 30;
const DELIVERY_TIMEOUT_MS = 10_000;

export interface CourierOptions {
  readonly store: IncidentStore;
  readonly channel: Channel;
  readonly clock: SchedulerLike;
  /** The entry as it is to be told now; undefined when nobody needs to be told. */
  readonly deliveryOf: (entry: OutboxEntry) => Delivery | undefined;
  readonly onTrouble: (words: string, isSetAside: boolean) => void;
  /** 0..1, jitter of the retries. */
  readonly random: () => number;
}

export class Courier {
  readonly #options: CourierOptions;
  #isBusy = false;
  #isStopped = false;
  #again = false;
  #wake: Subscription | undefined;
  #idle: (() => void)[] = [];

  constructor(options: CourierOptions) {
    this.#options = options;
  }

  /** Something may be due. Returns at once. */
  look(): void {
    this.#again = true;
    if (!this.#isBusy && !this.#isStopped) void this.#run();
  }

  /** Resolves when the round under way is over. */
  stop(): Promise<void> {
    this.#isStopped = true;
    this.#wake?.unsubscribe();
    return this.#isBusy ? new Promise((done) => this.#idle.push(done)) : Promise.resolve();
  }

  async #run(): Promise<void> {
    this.#isBusy = true;
    this.#wake?.unsubscribe();
    const { store, channel, clock, onTrouble } = this.#options;
    let waitMs: number | undefined;
    try {
      while (this.#again && !this.#isStopped) {
        this.#again = false;
        for (const entry of store.due(channel.id, clock.now() * 1000)) {
          if (this.#isStopped) break;
          if (await this.#take(entry)) this.#again = true;
        }
      }
      // Asked of the store: what an earlier round, or an earlier run of the program, put off is waited for too.
      const dueUs = store.nextDueUs(channel.id);
      if (dueUs !== undefined) waitMs = Math.max(0, Math.ceil(dueUs / 1000 - clock.now()));
    } catch (error) {
      onTrouble(`channel ${channel.id}: the outbox cannot be read or written: ${(error as Error).message}`, false);
      waitMs = LONGEST_RETRY_MS;
    }
    this.#isBusy = false;
    for (const done of this.#idle.splice(0)) done();
    if (waitMs !== undefined && !this.#isStopped) this.#wake = clock.schedule(() => this.look(), waitMs);
  }

  /** @returns whether the entry is done with, so that the next of its incident is due */
  async #take(entry: OutboxEntry): Promise<boolean> {
    const { store, channel, clock, deliveryOf, onTrouble, random } = this.#options;
    const delivery = deliveryOf(entry);
    if (!delivery) {
      store.delivered(entry.seq);
      return true;
    }
    try {
      await withTimeout(channel.deliver(delivery));
      store.delivered(entry.seq);
      return true;
    } catch (error) {
      const words = `channel ${channel.id}: ${error instanceof Error ? error.message : String(error)}`;
      if (entry.tries + 1 >= MOST_TRIES) {
        store.setAside(entry.seq, words);
        onTrouble(words, true);
        return true;
      }
      const waitMs = Math.min(LONGEST_RETRY_MS, FIRST_RETRY_MS * 2 ** entry.tries) * (0.5 + random() / 2);
      store.failed(entry.seq, words, Math.round((clock.now() + waitMs) * 1000));
      onTrouble(words, false);
      return false;
    }
  }
}

function withTimeout(work: Promise<void>): Promise<void> {
  let timer: NodeJS.Timeout | undefined;
  const late = new Promise<never>((_, fail) => {
    timer = setTimeout(() => fail(new Error(`no answer within ${DELIVERY_TIMEOUT_MS / 1000} s`)), DELIVERY_TIMEOUT_MS);
  });
  return Promise.race([work, late]).finally(() => clearTimeout(timer));
}
