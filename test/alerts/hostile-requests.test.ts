/** What any page in any browser, or any peer on this machine, can send to the watch server: none of it may stop the watch. */
import { connect } from "node:net";
import { afterEach, beforeEach, describe, expect, it } from "vitest";
import { WebSocket } from "ws";
import { startWatchServer, type WatchServer } from "../../alerts/watch/watch-server.ts";

let server: WatchServer;
const hello = { kind: "refused", reason: "stands for the greeting" } as const;
beforeEach(async () => {
  server = await startWatchServer({
    port: 0,
    hello: () => hello,
    acknowledge: () => {
      throw new Error("disk I/O error");
    },
    health: () => ({ status: "running" }),
  });
});
afterEach(() => server.stop());

/** Sends the text as it is, and gives what comes back until the other side closes. */
function raw(text: string): Promise<string> {
  return new Promise((done, fail) => {
    const socket = connect(Number(new URL(server.url).port), "127.0.0.1", () => socket.write(text));
    let got = "";
    socket.on("data", (data) => {
      got += String(data);
    });
    socket.on("close", () => done(got));
    socket.on("error", fail);
  });
}
const get = (path: string) => raw(`GET ${path} HTTP/1.1\r\nHost: 127.0.0.1\r\nConnection: close\r\n\r\n`);
const isRunning = async () => ((await (await fetch(`${server.url}healthz`)).json()) as { status: string }).status === "running";

describe("the watch server", () => {
  it.each(["/%zz", "/%", "/%c0%af", "//", "///", "http://[", "/%00", "/..%5c..%5cpackage.json"])(
    "answers a path that cannot be read (%s) with 404, and goes on",
    async (path) => {
      expect(await get(path)).toMatch(/^HTTP\/1\.1 40[04] /);
      expect(await isRunning()).toBe(true);
    },
  );

  it("outlives a peer that breaks off while it is refused", async () => {
    const port = Number(new URL(server.url).port);
    for (let k = 0; k < 20; k++)
      await new Promise<void>((done) => {
        const socket = connect(port, "127.0.0.1", () => {
          socket.write(
            "GET /elsewhere HTTP/1.1\r\nHost: x\r\nConnection: Upgrade\r\nUpgrade: websocket\r\nSec-WebSocket-Version: 13\r\nSec-WebSocket-Key: AAAAAAAAAAAAAAAAAAAAAA==\r\n\r\n",
            () => socket.resetAndDestroy(),
          );
        });
        socket.on("close", () => done());
        socket.on("error", () => {});
      });
    expect(await isRunning()).toBe(true);
  });

  it("closes a connection that does not speak JSON, or speaks too much", async () => {
    for (const [text, code] of [
      ["acknowledge!", 1003],
      ["x".repeat(5000), 1009],
    ] as const) {
      const ws = new WebSocket(`${server.url.replace("http", "ws")}live`);
      ws.on("error", () => {});
      ws.on("open", () => ws.send(text));
      expect(await new Promise((done) => ws.on("close", done))).toBe(code);
    }
    expect(await isRunning()).toBe(true);
  });

  it("says so when an acknowledgement cannot be stored, and goes on", async () => {
    const ws = new WebSocket(`${server.url.replace("http", "ws")}live`);
    const refusal = new Promise<unknown>((done) =>
      ws.on("message", (data) => {
        const message = JSON.parse(String(data));
        if (message.reason !== hello.reason) done(message);
      }),
    );
    ws.on("open", () => ws.send(JSON.stringify({ kind: "acknowledge", incident: "K7M3", by: "Ada" })));
    expect(await refusal).toEqual({
      kind: "refused",
      reason: "the acknowledgement of K7M3 could not be stored: disk I/O error. See the data folder's disk",
    });
    ws.close();
    expect(await isRunning()).toBe(true);
  });
});
