/** The watch page in real Chromium, fed by events as the pipeline makes them. */
import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { AxeBuilder } from "@axe-core/playwright";
import pino from "pino";
import type { Page } from "playwright-core";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import { type Alerts, openAlerts } from "../../alerts/index.ts";
import type { FeedHealth } from "../../ingest/types.ts";
import { located, network, noticed, wholeStory } from "../alerts/samples.ts";
import { openBrowser } from "./browser.ts";

const folder = mkdtempSync(join(tmpdir(), "spanmark-page-"));
let browser: Awaited<ReturnType<typeof openBrowser>>;
let alerts: Alerts;
let page: Page;
const errors: string[] = [];

const health = (over: Partial<FeedHealth> = {}): FeedHealth[] =>
  network.feeds.map((f) => ({
    feedId: f.id,
    state: "live",
    reason: "",
    frames: 100,
    missingFrames: 0,
    defects: {},
    newestTimeUs: Date.now() * 1000,
    ...(f.id === "brack-tolva-at-tolva" ? over : {}),
  }));

beforeAll(async () => {
  browser = await openBrowser();
  alerts = await openAlerts({ ...network, channels: [] }, { dataFolder: folder, port: 0, log: pino({ level: "silent" }) });
  page = await browser.context.newPage();
  page.on("pageerror", (error) => errors.push(error.message));
  page.on("console", (message) => message.type() === "error" && errors.push(message.text()));
});
afterAll(async () => {
  await browser.close();
  await alerts.stop();
  rmSync(folder, { recursive: true });
});

async function violations(scheme: "light" | "dark"): Promise<string[]> {
  await page.emulateMedia({ colorScheme: scheme, reducedMotion: "reduce" });
  const { violations: found } = await new AxeBuilder({ page }).analyze();
  return found.map((v) => `${scheme}: ${v.id}: ${v.nodes.map((n) => n.html.slice(0, 120)).join(" | ")}`);
}

describe("the watch page", () => {
  it("shows every line, and what nobody can see, before anything happens", async () => {
    alerts.feeds(health({ state: "stale", reason: "connected, but no frame comes" }));
    await page.goto(alerts.url);
    await page.getByText("Marrow Coast").waitFor();
    for (const line of network.lines) expect(await page.locator(".line-name", { hasText: line.name }).count()).toBeGreaterThan(0);
    await page.getByText("cannot see: connected, but no frame comes").waitFor();
    await page.locator(".end", { hasText: "Nolde" }).getByText("not measured").waitFor();
    expect(await page.locator(".line", { hasText: "Brack-Tolva" }).locator("path.unseen").count()).toBe(1);
    alerts.feeds(health());
    await page.getByText("cannot see: connected").waitFor({ state: "detached" });
  });

  it("a located fault is read off the page: line, phases, kilometres from both ends, towers, stretch, flag, why", async () => {
    alerts.record(noticed);
    await page.getByText("place not yet known").first().waitFor();
    alerts.record(located());
    for (const event of wholeStory.slice(2)) alerts.record(event);
    await page.getByRole("button", { name: /^Open/ }).first().click();
    const incident = page.locator("article.incident");
    await incident.getByText("no current at either end").first().waitFor();
    const text = (await incident.textContent()) ?? "";
    for (const words of [
      "A to ground",
      "41.3 km from Brack, 106.9 km from Tolva",
      "towers 118-119",
      "39.6-43.0 km (towers 118-121)",
      "Why firm",
      "both ends agree within 0.4 km",
      "ended after 74 ms",
      "two-ended negative sequence",
      "Treat the line as live",
    ]) {
      expect(text).toContain(words);
    }
    expect(await incident.locator("svg .bracket").count()).toBe(1);
    expect(await incident.locator("svg .weight").count()).toBe(1);
  });

  it("has nothing that axe finds, light or dark", async () => {
    expect([...(await violations("light")), ...(await violations("dark"))]).toEqual([]);
  });

  it("is acknowledged by keyboard, with a name", async () => {
    await page.getByLabel("Your name").focus();
    await page.keyboard.type("Ada");
    await page.keyboard.press("Enter");
    await page.getByText(/Seen by Ada/).waitFor();
    expect(await page.getByText("Not yet seen by anybody").count()).toBe(0);
  });

  it("fits a narrow window without scrolling sideways", async () => {
    await page.setViewportSize({ width: 360, height: 740 });
    expect(await page.evaluate("document.documentElement.scrollWidth")).toBeLessThanOrEqual(360);
    await page.setViewportSize({ width: 1440, height: 1000 });
  });

  it("says at once that it lost its server, counts the seconds, and strikes its claims", async () => {
    expect(errors).toEqual([]);
    await alerts.stop();
    const band = page.locator(".lost-band");
    await band.waitFor({ timeout: 15_000 });
    expect(await band.textContent()).toMatch(/No word from the server for \d+ s/);
    expect(await page.evaluate("getComputedStyle(document.querySelector('main')).textDecorationLine")).toBe("line-through");
  });
});
