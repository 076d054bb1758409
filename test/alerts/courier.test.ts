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

function setup(answer: (delivery: Delivery, count: number) => Promise<void>, jitter = 1) {
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
    random: () => jitter,
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

  it("keeps the time of a retry when something else comes between", async () => {
    const { store, clock, got, courier } = setup((_, n) => (n === 1 ? Promise.reject(new Error("500")) : Promise.resolve()));
    const a = store.open("a", noticed, 1, ["mail"]).incidentId;
    courier.look();
    await until(clock, 400);
    store.open("b", noticed, 1, ["mail"]);
    courier.look();
    await until(clock, 60_000);
    expect(got.filter((g) => g.key.startsWith(a)).map((g) => g.atMs)).toEqual([0, 1000]);
    expect(store.counts().waiting).toBe(0);
  });

  it("takes up, after a restart, what the run before it had put off", async () => {
    const { store, clock, got, courier } = setup(() => Promise.resolve());
    store.open("a", noticed, 1, ["mail"]);
    store.failed(store.due("mail", 0)[0]!.seq, "500", 30_000_000);
    courier.look();
    await until(clock, 60_000);
    expect(got.map((g) => g.atMs)).toEqual([30_000]);
  });

  it("tries again within half a second to a second, however the jitter falls", async () => {
    const { store, clock, got, courier } = setup((_, n) => (n === 1 ? Promise.reject(new Error("500")) : Promise.resolve()), 0);
    store.open("a", noticed, 1, ["mail"]);
    courier.look();
    await until(clock, 60_000);
    expect(got.map((g) => g.atMs)).toEqual([0, 500]);
  });

  it("one that hangs harms no other", async () => {
    const hanging = setup(() => new Promise(() => {}));
    const other = setup(() => Promise.resolve());
    for (const { store, courier } of [hanging, other]) {
      store.open("a", noticed, 1, ["mail"]);
      courier.look();
    }
    await until(other.clock, 10);
    expect(other.store.counts().waiting).toBe(0);
    expect(hanging.store.counts().waiting).toBe(1);
  });

  it("says in words that the store fails, stays up, and goes on when the store does", async () => {
    const { store, clock, got, troubles, courier } = setup(() => Promise.resolve());
    store.open("a", noticed, 1, ["mail"]);
    const broken = vi.spyOn(store, "delivered").mockImplementation(() => {
      throw new Error("disk I/O error");
    });
    const alsoBroken = vi.spyOn(store, "failed").mockImplementation(() => {
      throw new Error("disk I/O error");
    });
    courier.look();
    await until(clock, 100);
    expect(troubles).toEqual([["channel mail: the outbox cannot be read or written: disk I/O error", false]]);
    broken.mockRestore();
    alsoBroken.mockRestore();
    courier.look();
    await until(clock, 60_000);
    expect(store.counts().waiting).toBe(0);
    expect(new Set(got.map((g) => g.key)).size).toBe(1);
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
