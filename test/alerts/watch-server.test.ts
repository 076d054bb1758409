/** The watch server with a real WebSocket client and real requests on loopback. */

import { existsSync, mkdtempSync, rmSync } from "node:fs";
import { request } from "node:http";
import { tmpdir } from "node:os";
import { join } from "node:path";
import pino from "pino";
import { afterEach, beforeEach, describe, expect, it } from "vitest";
import { WebSocket } from "ws";
import { type Alerts, openAlerts, WatchServerError } from "../../alerts/index.ts";
import type { ToPage } from "../../alerts/watch/protocol.ts";
import { located, network, noticed, wholeStory } from "./samples.ts";

let folder: string;
let alerts: Alerts;
const open = (port = 0) => openAlerts({ ...network, channels: [] }, { dataFolder: folder, port, log: pino({ level: "silent" }) });
beforeEach(async () => {
  folder = mkdtempSync(join(tmpdir(), "spanmark-watch-"));
  alerts = await open();
});
afterEach(async () => {
  await alerts.stop();
  rmSync(folder, { recursive: true });
});

/** A page's connection: hands out messages in order, one at a time. */
function page(url: string, origin?: string) {
  const ws = new WebSocket(`${url.replace("http", "ws")}live`, origin ? { origin } : {});
  const come: ToPage[] = [];
  const waiting: ((m: ToPage) => void)[] = [];
  ws.on("message", (data) => {
    const message = JSON.parse(String(data)) as ToPage;
    const next = waiting.shift();
    if (next) next(message);
    else come.push(message);
  });
  const next = (): Promise<ToPage> =>
    come.length > 0 ? Promise.resolve(come.shift()!) : new Promise((done) => waiting.push(done));
  const until = async <K extends ToPage["kind"]>(kind: K): Promise<Extract<ToPage, { kind: K }>> => {
    for (;;) {
      const message = await next();
      if (message.kind === kind) return message as Extract<ToPage, { kind: K }>;
    }
  };
  const refused = new Promise<number>((done) => ws.on("unexpected-response", (_, response) => done(response.statusCode ?? 0)));
  ws.on("error", () => {});
  return { ws, until, refused };
}

describe("the watch server", () => {
  it("greets with the network and what is known, then tells each fact, then its pulse", async () => {
    const { ws, until } = page(alerts.url);
    const hello = await until("hello");
    expect(hello.network.lines.map((l) => l.name)[0]).toBe("Brack-Tolva");
    expect(hello.incidents).toEqual([]);
    alerts.record(noticed);
    expect((await until("incident")).incident).toMatchObject({ stage: "noticed", lineId: "brack-tolva" });
    alerts.record(located());
    const { incident } = await until("incident");
    expect(incident).toMatchObject({ stage: "provisional", phases: "A to ground", revision: 2 });
    expect(incident.history.map((h) => h.head)).toEqual(["Noticed", "Located, so far"]);
    alerts.feeds([{ feedId: "brack-tolva-at-brack", state: "live", reason: "", frames: 3, missingFrames: 0, defects: {} }]);
    expect((await until("pulse")).feeds.length).toBe(1);
    ws.close();
  });

  it("keeps an acknowledgement with its name; the second is told who was first", async () => {
    for (const event of wholeStory) alerts.record(event);
    const { ws, until } = page(alerts.url);
    const { incident: id } = (await until("hello")).incidents[0]!;
    const acknowledge = (by: string) => ws.send(JSON.stringify({ kind: "acknowledge", incident: id, by }));
    acknowledge("Ada");
    expect((await until("incident")).incident.acknowledged).toMatchObject({ by: "Ada" });
    acknowledge("Bo");
    expect(await until("refused")).toEqual({ kind: "refused", reason: `incident ${id} was acknowledged by Ada` });
    ws.send(JSON.stringify({ kind: "acknowledge", incident: id, by: " " }));
    expect((await until("refused")).reason).toMatch(/by/);
    ws.close();
    await alerts.stop();
    alerts = await open();
    const again = page(alerts.url);
    expect((await again.until("hello")).incidents[0]).toMatchObject({ incident: id, acknowledged: { by: "Ada" } });
    again.ws.close();
  });

  it("refuses a page of another origin, and takes its own", async () => {
    expect(await page(alerts.url, "http://evil.example").refused).toBe(403);
    const own = page(alerts.url, alerts.url.slice(0, -1));
    await own.until("hello");
    own.ws.close();
  });

  it("serves the page under a policy without inline script, and nothing beside it", async () => {
    const response = await fetch(alerts.url);
    expect(response.status).toBe(200);
    const policy = response.headers.get("content-security-policy")!;
    expect(policy).toContain("script-src 'self'");
    expect(policy).not.toContain("unsafe");
    expect(await response.text()).not.toMatch(/<script(?![^>]*src=)/);
    const { port } = new URL(alerts.url);
    const raw = (path: string) =>
      new Promise<number>((done) =>
        request({ port: Number(port), host: "127.0.0.1", path }, (r) => done(r.resume().statusCode ?? 0)).end(),
      );
    for (const path of ["/../spanmark.js", "/..%2fspanmark.js", "/%2e%2e/%2e%2e/package.json", "/none", "/assets"])
      expect(await raw(path), path).toBe(404);
    expect((await fetch(alerts.url, { method: "POST" })).status).toBe(405);
    expect(await (await fetch(`${alerts.url}healthz`)).json()).toMatchObject({
      status: "running",
      outbox: { waiting: 0, setAside: 0 },
    });
  });

  it("says in words that its port is taken, and leaves no store open", async () => {
    const { port } = new URL(alerts.url);
    const other = mkdtempSync(join(tmpdir(), "spanmark-watch-"));
    const attempt = openAlerts(
      { ...network, channels: [] },
      { dataFolder: other, port: Number(port), log: pino({ level: "silent" }) },
    );
    await expect(attempt).rejects.toThrow(WatchServerError);
    await expect(attempt).rejects.toThrow(`port ${port} is taken: choose another with --port, or 0 for any free one`);
    // A closed database takes its log with it.
    expect(existsSync(join(other, "incidents.sqlite"))).toBe(true);
    expect(existsSync(join(other, "incidents.sqlite-wal"))).toBe(false);
    rmSync(other, { recursive: true });
  });

  it("leaves nothing open when it stops: pages, port, database", async () => {
    alerts.record(noticed);
    const { ws, until } = page(alerts.url);
    await until("hello");
    expect(existsSync(join(folder, "incidents.sqlite-wal"))).toBe(true);
    const closed = new Promise((done) => ws.on("close", done));
    const { url } = alerts;
    await alerts.stop();
    await closed;
    await expect(fetch(url)).rejects.toThrow();
    expect(existsSync(join(folder, "incidents.sqlite-wal"))).toBe(false);
    alerts = await open(Number(new URL(url).port));
    expect(alerts.url).toBe(url);
  });
});
