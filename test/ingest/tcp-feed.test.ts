/** Feeds over real sockets on loopback. Each wait is for a state or a frame, never for a time. */
import { createServer } from "node:net";
import pino from "pino";
import { filter, firstValueFrom, map } from "rxjs";
import { afterEach, describe, expect, it } from "vitest";
import type { Network } from "../../config/index.ts";
import { type OpenFeeds, openFeeds } from "../../ingest/index.ts";
import type { FeedHealth } from "../../ingest/types.ts";
import { plainNetwork } from "../pipeline/network.ts";
import { frameOf, startUnit, streamOf, type UnitPeer } from "./unit-peer.ts";

const M60 = { pmuClass: "M", reportingRateHz: 60 } as const;
const open: (OpenFeeds | UnitPeer)[] = [];
afterEach(async () => {
  for (const one of open.splice(0)) await ("stop" in one ? one.stop() : one.close());
});

function networkAt(...addresses: string[]): Network {
  const network = plainNetwork([M60, M60]);
  return { ...network, feeds: network.feeds.map((f, k) => ({ ...f, address: addresses[k]! })) };
}
async function unit(idCode: number, names?: readonly string[]): Promise<UnitPeer> {
  const peer = await startUnit(streamOf(idCode, names));
  open.push(peer);
  return peer;
}
function watch(network: Network) {
  const logged: { msg: string; feed: string; defect?: string }[] = [];
  const log = pino({ level: "info" }, { write: (line: string) => void logged.push(JSON.parse(line)) });
  const feeds = openFeeds(network, { log, random: () => 0 });
  open.push(feeds);
  const health = (k: number, is: (h: FeedHealth) => boolean) =>
    firstValueFrom(
      feeds.health.pipe(
        map((all) => all[k]!),
        filter(is),
      ),
    );
  const rows = (k: number, slots: number) =>
    firstValueFrom(feeds.blocks.pipe(filter((b) => b.feedId === network.feeds[k]!.id && b.ring.newestSlot % 60 >= slots)));
  return { feeds, logged, health, rows };
}

describe("feeds over TCP", () => {
  it("go live, and their frames stand in the ring with both times", async () => {
    const [a, b] = [await unit(1), await unit(2)];
    const { rows, health } = watch(networkAt(a.address, b.address));
    await Promise.all([a.asked(), b.asked()]);
    const got = rows(0, 3);
    for (const slot of [0, 1, 2, 3]) a.send(frameOf(streamOf(1), slot));
    const block = await got;
    const row = block.ring.rowOf(block.lastSlot);
    expect(block.ring.timeUs[row]).toBe(1_772_590_440e6 + 50_000);
    expect(block.ring.arrivedUs[row]).toBeGreaterThan(1_772_590_440e6);
    expect(await health(0, (h) => h.frames === 4)).toMatchObject({ state: "live", reason: "", missingFrames: 0, defects: {} });
  });

  it("a unit that cannot be reached is a state with its reason; the other goes on", async () => {
    const gone = createServer();
    await new Promise<void>((done) => gone.listen(0, "127.0.0.1", done));
    const { port } = gone.address() as { port: number };
    await new Promise((done) => gone.close(done));
    const b = await unit(2);
    const { health, logged, rows } = watch(networkAt(`tcp://127.0.0.1:${port}`, b.address));
    expect((await health(0, (h) => h.state === "stale")).reason).toBe(
      `tcp://127.0.0.1:${port} cannot be reached: connection refused (is the unit's server running, is the port right?)`,
    );
    await b.asked();
    const got = rows(1, 0);
    b.send(frameOf(streamOf(2), 0));
    await got;
    expect(logged.some((l) => l.feed === "at-brack" && l.msg.includes("connection refused"))).toBe(true);
  });

  it("a wrong IDCODE is refused with what was expected and found", async () => {
    const a = await unit(77);
    const b = await unit(2);
    const { health, logged } = watch(networkAt(a.address, b.address));
    const refused = await health(0, (h) => h.state === "refused");
    expect(refused.reason).toBe("expected IDCODE 1, found 77: check the feed's idCode in the network file");
    expect(refused.defects).toEqual({ "wrong-id-code": 1 });
    expect(logged.filter((l) => l.defect === "wrong-id-code").length).toBe(1);
  });

  it("a bad CRC costs its frame, is counted and logged once; the frames around it stand", async () => {
    const [a, b] = [await unit(1), await unit(2)];
    const { rows, health, logged } = watch(networkAt(a.address, b.address));
    await a.asked();
    const bad = frameOf(streamOf(1), 1);
    bad[30] = bad[30]! ^ 0x10;
    const got = rows(0, 2);
    a.send(Buffer.concat([frameOf(streamOf(1), 0), bad, frameOf(streamOf(1), 2)]));
    const block = await got;
    expect([0, 1, 2].map((k) => block.ring.rowOf(block.lastSlot - 2 + k) >= 0)).toEqual([true, false, true]);
    const counted = await health(0, (h) => h.frames === 2);
    expect(counted.defects["bad-crc"]).toBe(1);
    expect(counted.missingFrames).toBe(1);
    expect(logged.filter((l) => l.defect === "bad-crc").length).toBe(1);
  });

  it("a frame cut short by a lost connection is counted; the feed comes back by itself", async () => {
    const [a, b] = [await unit(1), await unit(2)];
    const { rows, health } = watch(networkAt(a.address, b.address));
    await a.asked();
    const first = rows(0, 0);
    a.send(Buffer.concat([frameOf(streamOf(1), 0), frameOf(streamOf(1), 1).subarray(0, 20)]));
    await first;
    const lost = health(0, (h) => h.state === "stale");
    a.drop();
    expect((await lost).reason).toBe("the unit closed the connection");
    await a.asked();
    const again = rows(0, 5);
    a.send(frameOf(streamOf(1), 5));
    await again;
    expect((await health(0, (h) => h.frames === 2 && h.state === "live")).defects).toEqual({ truncated: 1 });
  });

  it("a stream without a terminal's channels is refused, with what it holds", async () => {
    const a = await unit(1, ["VA", "VB", "VC", "IA", "IB", "IX"]);
    const b = await unit(2);
    const { health } = watch(networkAt(a.address, b.address));
    expect((await health(0, (h) => h.state === "refused")).reason).toBe(
      'brack-tolva/brack: channel not in the stream of feed at-brack: IC = "IC"; it holds "VA", "VB", "VC", "IA", "IB", "IX"',
    );
  });

  it("stop leaves no socket and no timer, and may be called twice", async () => {
    const [a, b] = [await unit(1), await unit(2)];
    const count = () => process.getActiveResourcesInfo().filter((r) => r === "TCPSocketWrap" || r === "Timeout").length;
    const before = count();
    const { feeds } = watch(networkAt(a.address, b.address));
    await Promise.all([a.asked(), b.asked()]);
    await feeds.stop();
    await feeds.stop();
    await Promise.all([a.close(), b.close()]);
    await new Promise((done) => setImmediate(done));
    expect(count()).toBeLessThanOrEqual(before);
  });
});
