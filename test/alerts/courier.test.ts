import { VirtualTimeScheduler } from "rxjs";
import { afterEach, describe, expect, it, vi } from "vitest";
import type { Channel, Delivery } from "../../alerts/delivery/channel.ts";
import { Courier } from "../../alerts/delivery/courier.ts";
import { openSqliteStore } from "../../alerts/store/sqlite-store.ts";
import { cleared, located, noticed } from "./samples.ts";

/** Advances virtual time, letting promises settle between. */
async function until(clock: VirtualTimeScheduler, ms: number): Promise<void> {
  for (;;) {
    for (let k = 0; k < 50; k++) await Promise.resolve();
    const next = clock.actions.filter((a) => !a.closed).sort((a, b) => a.delay - b.delay)[0];
    if (!next || next.delay > ms) break;
    clock.maxFrames = next.delay;
    clock.flush();
  }
  clock.frame = Math.max(clock.frame, ms);
}

function setup(answer: (delivery: Delivery, count: number) => Promise<void>) {
  const store = openSqliteStore(":memory:");
  const clock = new VirtualTimeScheduler();
  const got: { key: string; atMs: number }[] = [];
  const troubles: [string, boolean][] = [];
  const channel: Channel = {
    id: "mail",
    deliver(delivery) {
      got.push({ key: delivery.key, atMs: clock.now() });
      return answer(delivery, got.length);
    },
  };
  const courier = new Courier({
    store,
    channel,
    clock,
    deliveryOf: (entry) => ({ key: entry.key, atUs: 0 }) as Delivery,
    onTrouble: (words, isSetAside) => troubles.push([words, isSetAside]),
    random: () => 1,
  });
  return { store, clock, got, troubles, courier };
}
afterEach(() => {
  vi.useRealTimers();
});

describe("a courier", () => {
  it("takes entries in order, each once", async () => {
    const { store, clock, got, courier } = setup(() => Promise.resolve());
    const a = store.open("a", noticed, 1, ["mail"]).incidentId;
    store.append(a, located(), 2, ["mail"]);
    store.append(a, cleared, 3, ["mail"]);
    courier.look();
    await until(clock, 10);
    expect(got.map((g) => g.key)).toEqual([1, 2, 3].map((n) => `${a}/${n}/mail`));
    expect(store.counts()).toEqual({ waiting: 0, setAside: 0 });
    courier.look();
    await until(clock, 20);
    expect(got.length).toBe(3);
  });

  it("tries again after a second, then ever longer, with the same key, and lets other incidents pass", async () => {
    const { store, clock, got, troubles, courier } = setup((d, n) =>
      d.key.includes("/1/") && n < 5 ? Promise.reject(new Error("500")) : Promise.resolve(),
    );
    const a = store.open("a", noticed, 1, ["mail"]).incidentId;
    const b = store.open("b", noticed, 1, ["mail"]).incidentId;
    store.append(a, located(), 2, ["mail"]);
    courier.look();
    await until(clock, 60_000);
    const ofA = got.filter((g) => g.key.startsWith(a));
    expect(got[1]!.key.startsWith(b)).toBe(true);
    expect(ofA.map((g) => g.atMs)).toEqual([0, 1000, 3000, 7000, 7000]);
    expect(new Set(ofA.slice(0, 4).map((g) => g.key)).size).toBe(1);
    expect(ofA[4]!.key).toBe(`${a}/3/mail`);
    expect(troubles[0]).toEqual(["channel mail: 500", false]);
    expect(store.counts().waiting).toBe(0);
  });

  it("sets aside what is refused for good, and says so", async () => {
    const { store, clock, troubles, courier } = setup(() => Promise.reject(new Error("no such room")));
    store.open("a", noticed, 1, ["mail"]);
    courier.look();
    await until(clock, 3_600_000);
    expect(store.counts()).toEqual({ waiting: 0, setAside: 1 });
    expect(troubles.at(-1)).toEqual(["channel mail: no such room", true]);
    expect(troubles.length).toBe(30);
  });

  it("gives up on a channel that never answers, and tries it again", async () => {
    vi.useFakeTimers();
    const { store, clock, troubles, courier } = setup((_, n) => (n === 1 ? new Promise(() => {}) : Promise.resolve()));
    store.open("a", noticed, 1, ["mail"]);
    courier.look();
    await vi.advanceTimersByTimeAsync(10_000);
    await until(clock, 5_000);
    expect(troubles).toEqual([["channel mail: no answer within 10 s", false]]);
    expect(store.counts().waiting).toBe(0);
  });

  it("stops after the delivery under way, and starts no other", async () => {
    let finish = () => {};
    const { store, clock, got, courier } = setup(() => new Promise((done) => (finish = done)));
    const a = store.open("a", noticed, 1, ["mail"]).incidentId;
    store.append(a, located(), 2, ["mail"]);
    courier.look();
    await until(clock, 1);
    const stopped = courier.stop();
    finish();
    await stopped;
    await until(clock, 100_000);
    expect(got.length).toBe(1);
    expect(store.counts().waiting).toBe(1);
  });
});
