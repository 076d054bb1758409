/** Feeds over real sockets on loopback. Each wait is for a state or a frame, never for a time. */
import { mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { createServer, type Socket } from "node:net";
import { tmpdir } from "node:os";
import { join } from "node:path";
import pino from "pino";
import { filter, firstValueFrom, map } from "rxjs";
import { afterEach, describe, expect, it } from "vitest";
import type { Network } from "../../config/index.ts";
import { encodeConfig, type OpenFeeds, openFeeds, Recorder, replayRecordings } from "../../ingest/index.ts";
import type { FeedHealth } from "../../ingest/types.ts";
import { plainNetwork } from "../pipeline/network.ts";
import { frameOf, startUnit, streamOf, type UnitPeer } from "./unit-peer.ts";

const M60 = { pmuClass: "M", reportingRateHz: 60 } as const;
const open: (Pick<OpenFeeds, "stop"> | UnitPeer)[] = [];
afterEach(async () => {
  for (const one of open.splice(0)) await ("stop" in one ? one.stop() : one.close());
});

function networkAt(...addresses: string[]): Network {
  const network = plainNetwork([M60, M60]);
  return {
    ...network,
    feeds: network.feeds.map((f, k) => ({ ...f, address: addresses[k]! })),
  };
}
async function unit(idCode: number, names?: readonly string[]): Promise<UnitPeer> {
  const peer = await startUnit(streamOf(idCode, names));
  open.push(peer);
  return peer;
}
/** A server that answers nothing by itself, for peers that misbehave. */
async function peer(onClient: (socket: Socket) => void) {
  const clients: Socket[] = [];
  const server = createServer((socket) => {
    clients.push(socket);
    socket.on("error", () => socket.destroy());
    onClient(socket);
  });
  await new Promise<void>((done) => server.listen(0, "127.0.0.1", done));
  open.push({
    stop() {
      for (const socket of clients) socket.destroy();
      return new Promise((done) => server.close(() => done()));
    },
  });
  return { address: `tcp://127.0.0.1:${(server.address() as { port: number }).port}`, clients };
}
/** The system's clock, which a test can put forward. */
function clock() {
  let aheadUs = 0;
  return {
    now: () => Date.now() * 1000 + aheadUs,
    forward: (seconds: number) => {
      aheadUs += seconds * 1e6;
    },
  };
}
function watch(network: Network, options: { now?: () => number; recorder?: Recorder } = {}) {
  const logged: { msg: string; feed: string; defect?: string }[] = [];
  const log = pino({ level: "info" }, { write: (line: string) => void logged.push(JSON.parse(line)) });
  const feeds = openFeeds(network, { log, random: () => 0, ...options });
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

  it("a feed that failed keeps its reason while it is tried again", async () => {
    const states: string[] = [];
    const { address, clients } = await peer((socket) => socket.destroy());
    const b = await unit(2);
    const { feeds, health, logged } = watch(networkAt(address, b.address));
    feeds.health.subscribe((all) => states.push(all[0]!.state));
    await health(0, (h) => h.state === "stale");
    const triedBefore = clients.length;
    await health(0, () => clients.length >= triedBefore + 2);
    expect(states.slice(states.indexOf("stale"))).not.toContain("connecting");
    expect(logged.filter((l) => l.feed === "at-brack").length).toBe(1);
  });

  it("an address that is none is refused with its reason, and never tried", async () => {
    const b = await unit(2);
    const { health } = watch(networkAt("tcp://127.0.0.1:99999", b.address));
    expect(await health(0, (h) => h.state === "refused")).toMatchObject({
      reason: "expected an address such as tcp://10.1.2.3:4712, found tcp://127.0.0.1:99999",
    });
    await b.asked();
  });

  it("a unit that answers nothing, and one that falls silent: each says so, is given up, and is tried again", async () => {
    const { now, forward } = clock();
    const mute = await peer(() => {});
    const b = await unit(2);
    const { health, rows } = watch(networkAt(mute.address, b.address), { now });
    await b.asked();
    const got = rows(1, 0);
    b.send(frameOf(streamOf(2), 0));
    await got;
    await health(1, (h) => h.state === "live");
    await health(0, (h) => h.state === "configuring");
    forward(3);
    expect((await health(1, (h) => h.state === "stale")).reason).toBe("connected, but no frame comes");
    forward(3);
    expect((await health(0, (h) => h.state === "stale")).reason).toContain("no configuration frame came");
    const again = rows(1, 7);
    b.send(frameOf(streamOf(2), 7));
    await again;
    await health(1, (h) => h.state === "live");
    forward(11);
    expect((await health(1, (h) => h.state === "stale" && h.reason.includes("given up"))).reason).toMatch(
      /no frame came for 1[0-2] s/,
    );
    forward(20);
    await health(1, (h) => h.state === "live");
  });

  it("frames of another IDCODE amid a good stream are counted; a stream of nothing else says which IDCODE came", async () => {
    const { now, forward } = clock();
    const [a, b] = [await unit(1), await unit(2)];
    const { health, rows } = watch(networkAt(a.address, b.address), { now });
    await a.asked();
    const got = rows(0, 1);
    a.send(Buffer.concat([frameOf(streamOf(1), 0), frameOf(streamOf(9), 0), frameOf(streamOf(1), 1)]));
    await got;
    const first = await health(0, (h) => h.frames === 2);
    expect(first).toMatchObject({ state: "live", reason: "", defects: { "wrong-id-code": 1 } });
    a.send(frameOf(streamOf(9), 2));
    await health(0, (h) => h.defects["wrong-id-code"] === 2);
    forward(3);
    expect((await health(0, (h) => h.state === "stale")).reason).toContain("expected IDCODE 1, found 9");
  });

  it("bytes without end that hold no frame are given up", async () => {
    const garbage = await peer((socket) => {
      const more = () => {
        while (!socket.destroyed && socket.write(Buffer.alloc(4096, 7)));
      };
      socket.on("drain", more);
      more();
    });
    const b = await unit(2);
    const { health } = watch(networkAt(garbage.address, b.address));
    expect((await health(0, (h) => h.state === "stale")).reason).toMatch(/sends bytes in which no C37.118.2 frame can be found/);
  });

  it("a unit that comes back with a much larger configuration is taken again", async () => {
    const b = await unit(2);
    let config = streamOf(1);
    const a = await peer((socket) => {
      socket.on("data", () => {});
      socket.write(encodeConfig(config, "configuration-2", 0));
    });
    const { health } = watch(networkAt(a.address, b.address));
    await health(0, (h) => h.state === "live");
    const { units } = streamOf(1);
    config = { ...config, units: [units[0]!, ...Array.from({ length: 20 }, (_, k) => ({ ...units[0]!, idCode: 500 + k }))] };
    a.clients[0]!.destroy();
    await health(0, (h) => h.state === "stale");
    await health(0, (h) => h.state === "live");
    expect((await health(0, () => true)).defects).toEqual({});
  });

  it("what it records plays again row for row, also what came twice; a folder that cannot be made is refused", async () => {
    const folder = mkdtempSync(join(tmpdir(), "spanmark-record-"));
    const [a, b] = [await unit(1), await unit(2)];
    const network = networkAt(a.address, b.address);
    const recorder = new Recorder(join(folder, "recordings"));
    const { feeds, rows } = watch(network, { recorder });
    await a.asked();
    const got = rows(0, 4);
    for (const slot of [0, 1, 1, 3, 2, 4]) a.send(frameOf(streamOf(1), slot));
    const { ring } = await got;
    await feeds.stop();
    await recorder.close();
    const file = join(folder, "recordings", "feeds", "at-brack");
    const played = [...replayRecordings(network, new Map([["at-brack", file]]), pino({ level: "silent" }))];
    expect(played.map((p) => p.lastSlot - ring.newestSlot)).toEqual([-4, -3, -1, -2, 0]);
    const again = played.at(-1)!.ring;
    expect(again.phasors).toEqual(ring.phasors);
    expect(again.timeUs).toEqual(ring.timeUs);
    writeFileSync(join(folder, "taken"), "");
    const taken = new Recorder(join(folder, "taken"));
    expect(() => openFeeds(network, { log: pino({ level: "silent" }), recorder: taken })).toThrow(
      expect.objectContaining({ code: "unwritable" }),
    );
    await taken.close();
    rmSync(folder, { recursive: true });
  });

  it("stopping waits for no peer that has stopped reading, nor for a connection that is still being made", async () => {
    const full = await peer((socket) => socket.pause());
    const { feeds, health } = watch(networkAt(full.address, full.address));
    await health(0, (h) => h.state === "configuring");
    await feeds.stop();
    await watch(networkAt(full.address, full.address)).feeds.stop();
    expect(process.getActiveResourcesInfo()).not.toContain("TCPConnectWrap");
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
    // The peers' own ends are let go by the system some turns after they are closed.
    for (let turn = 0; turn < 1000 && count() > before; turn++) await new Promise((done) => setImmediate(done));
    expect(count()).toBeLessThanOrEqual(before);
  });
});
