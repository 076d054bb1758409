/** Simulator and monitor as two processes over real sockets, in real time. */
import { mkdtempSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { afterAll, expect, it } from "vitest";
import { demoNetworkPath, loadNetwork } from "../../config/index.ts";
import { json, type Running, run } from "./processes.ts";

const folder = mkdtempSync(join(tmpdir(), "spanmark-live-"));
const running: Running[] = [];
const start = (...args: string[]) => {
  const one = run(...args);
  running.push(one);
  return one;
};
afterAll(async () => {
  for (const { child } of running) child.kill("SIGKILL");
  await Promise.all(running.map((r) => r.ended));
  rmSync(folder, { recursive: true });
});

interface Report {
  incident: string;
  stage: string;
  line: string;
  phases: string;
  onsetUs: number;
  clearedUs: number;
  km: number;
  stretchKm: [number, number];
  publishedUs: number;
}

it("locates a live fault within 2 % of the line, tells it within a second, and a replay of the recording says the same", async () => {
  const simulator = start("simulate", "--serve", "--ports", "system", "--json");
  const addresses = await simulator.until(
    json((o) => o.addresses as Record<string, string> | undefined),
    "its addresses",
  );
  const monitor = start(
    "watch",
    "--network",
    demoNetworkPath(),
    "--json",
    "--port",
    "0",
    "--data",
    join(folder, "data"),
    "--record",
    join(folder, "recordings"),
    ...Object.entries(addresses).flatMap(([feed, address]) => ["--address", `${feed}=${address}`]),
  );
  const truth = await simulator.until(
    json((o) => o.truth as { line: string; phases: string; km: number; onsetUs: number } | undefined),
    "the first fault",
  );
  const first = await monitor.until(
    json((o) => (o.stage === "provisional" || o.stage === "refined" ? (o as unknown as Report) : undefined)),
    "a place",
  );
  const settled = await monitor.until(
    json((o) => (o.stage === "settled" ? (o as unknown as Report) : undefined)),
    "a settled place",
  );

  const line = loadNetwork(demoNetworkPath()).lines.find((l) => l.id === truth.line)!;
  expect(settled).toMatchObject({ line: truth.line, phases: truth.phases });
  expect(Math.abs(settled.km - truth.km)).toBeLessThan(0.02 * line.lengthKm);
  expect(Math.abs(first.km - truth.km)).toBeLessThan(0.02 * line.lengthKm);
  expect(Math.abs(settled.onsetUs - truth.onsetUs)).toBeLessThan(5_000);
  // The promise to the control room, not a benchmark: half a window, the feed's delay and ours make some 0.2 s of it.
  expect(first.publishedUs - truth.onsetUs).toBeLessThan(1_000_000);

  monitor.child.kill("SIGINT");
  expect(await monitor.ended).toBe(0);
  simulator.child.kill("SIGINT");
  expect(await simulator.ended).toBe(0);

  const feeds = line.terminals.flatMap((t) => (t.measured ? [t.measured.feedId] : []));
  const replay = start(
    "locate",
    "--network",
    demoNetworkPath(),
    "--json",
    ...feeds.flatMap((id) => ["--feed", `${id}=${join(folder, "recordings", "feeds", id)}`]),
  );
  expect(await replay.ended).toBe(0);
  const replayed = replay.lines.map((l) => JSON.parse(l) as Report);
  expect(replayed.length).toBe(1);
  const { incident: _a, publishedUs: _b, ...live } = settled as Report & { revision: number; text: string; readOut: string };
  for (const key of [
    "line",
    "phases",
    "onsetUs",
    "clearedUs",
    "km",
    "stretchKm",
    "flag",
    "resistanceOhm",
    "estimates",
    "stage",
  ] as const) {
    expect(replayed[0]![key as keyof Report], key).toEqual(live[key as keyof typeof live]);
  }
  expect(readFileSync(join(folder, "data", "incidents.jsonl"), "utf8")).toContain(settled.incident);
}, 90_000);

it("demo once: ends by itself after the first complete incident, and shows it in words", async () => {
  const demo = start("watch", "--demo", "--once", "--port", "0", "--data", join(folder, "once"));
  expect(await demo.ended).toBe(0);
  const text = demo.lines.join("\n");
  for (const word of ["Noticed", "Located", "Cleared", "Settled", "km from", "towers", "Why:", "Treat the line as live"])
    expect(text).toContain(word);
}, 90_000);

it("says in one line what is wrong, and exits with 2", async () => {
  const cases: [string[], RegExp][] = [
    [["watch", "--network", join(folder, "none.yaml")], /none\.yaml: expected a readable network file/],
    [["watch"], /name a network with --network/],
    [["locate", "--network", demoNetworkPath(), "--feed", "nowhere=x"], /no feed "nowhere" in the network file/],
    [["locate", "--network", demoNetworkPath(), "--feed", "ister-nolde-at-ister=/dev/null"], /no configuration frame/],
    [["simulate", "--scenario", "storm"], /no scenario "storm"; there are quiet/],
    [["watch", "--network", demoNetworkPath(), "--address", "x=tcp://127.0.0.1:1"], /no feed "x"/],
  ];
  for (const [args, words] of cases) {
    const one = start(...args);
    expect(await one.ended, args.join(" ")).toBe(2);
    expect(one.errors.join("\n")).toMatch(words);
    expect(one.errors.join("\n")).not.toContain("    at ");
  }
});
