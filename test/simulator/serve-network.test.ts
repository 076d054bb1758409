import { connect } from "node:net";
import { expect, it } from "vitest";
import { demoNetworkPath, loadNetwork } from "../../config/index.ts";
import { decodeConfig, encodeCommand, Framer, timeUsOf, typeOf } from "../../ingest/index.ts";
import { serveNetwork } from "../../simulator/index.ts";

const demo = loadNetwork(demoNetworkPath());
const network = { ...demo, lines: demo.lines.slice(0, 1), feeds: demo.feeds.slice(0, 2) };

/** Asks a unit for its configuration and data; resolves with the stamps of the first `count` data frames. */
function client(address: string, count: number, idCode = 101) {
  const { hostname, port } = new URL(address);
  const socket = connect(Number(port), hostname);
  socket.write(encodeCommand(idCode, "send-configuration-2", 0));
  const stamps: number[] = [];
  let defects = 0;
  const done = new Promise<{ stamps: number[]; defects: number }>((resolve) => {
    let names: string[] = [];
    const framer = new Framer({
      frame(bytes, at, size) {
        const type = typeOf(bytes[at + 1]!);
        if (type === "configuration-2") {
          names = decodeConfig(bytes, at, size).units[0]!.phasors.map((p) => p.name);
          socket.write(encodeCommand(idCode, "data-on", 0));
        }
        if (type !== "data") return;
        expect(names).toEqual(["VA", "VB", "VC", "IA", "IB", "IC"]);
        const view = new DataView(bytes.buffer, bytes.byteOffset + at);
        stamps.push(timeUsOf(view.getUint32(6), view.getUint32(10), 1_000_000));
        if (stamps.length === count) resolve({ stamps, defects });
      },
      defect() {
        defects++;
      },
    });
    socket.on("data", (chunk) => framer.push(chunk));
  });
  return { socket, done, count: () => stamps.length };
}

it("answers commands, streams frames on the second's grid without a gap, serves several, and ends when told", async () => {
  const stop = new AbortController();
  let served: Promise<void> | undefined;
  const addresses = await new Promise<Readonly<Record<string, string>>>((ready) => {
    served = serveNetwork(network, {
      ports: "system",
      firstFaultAfterS: 100,
      everyS: 100,
      seed: 1,
      noise: 0.001,
      instrumentErrors: 0,
      latencyMs: 0,
      onReady: ready,
      onTruth() {},
      signal: stop.signal,
    });
  });
  expect(Object.keys(addresses)).toEqual(["brack-tolva-at-brack", "brack-tolva-at-tolva"]);
  const one = client(addresses["brack-tolva-at-brack"]!, 30);
  const two = client(addresses["brack-tolva-at-brack"]!, 4);
  await two.done;
  // Gone without a word: a reset, in the middle of the stream.
  two.socket.resetAndDestroy();
  const fromThen = one.count();
  const { stamps, defects } = await one.done;
  expect(fromThen).toBeLessThan(stamps.length);
  expect(defects).toBe(0);
  stamps.forEach((t, k) => {
    const slot = Math.round((t * 60) / 1e6);
    expect(Math.abs(t - (slot * 1e6) / 60)).toBeLessThanOrEqual(1);
    if (k > 0) expect(slot - Math.round((stamps[k - 1]! * 60) / 1e6)).toBe(1);
  });
  // Both are still there and listening when the end comes: it takes them along, and nobody answers afterwards.
  const other = client(addresses["brack-tolva-at-tolva"]!, 2, 102);
  await other.done;
  const closed = [one, other].map(({ socket }) => new Promise<void>((gone) => socket.once("close", () => gone())));
  stop.abort();
  await served;
  await Promise.all(closed);
  for (const address of Object.values(addresses)) {
    const { hostname, port } = new URL(address);
    const refused = await new Promise<string>((told) => {
      connect(Number(port), hostname)
        .once("connect", () => told("answered"))
        .once("error", (e: NodeJS.ErrnoException) => told(String(e.code)));
    });
    expect(refused).toBe("ECONNREFUSED");
  }
});
