#!/usr/bin/env node
/** The command line: reads arguments, composes the stages, holds no logic. Exit codes: 0 done, 1 failed while running, 2 asked for something impossible. */
import { spawn } from "node:child_process";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { createInterface } from "node:readline";
import { fileURLToPath } from "node:url";
import { Command, InvalidArgumentError } from "commander";
import pino, { type Logger } from "pino";
import { asyncScheduler, from } from "rxjs";
import { ChannelError, foldEvents, openAlerts, StoreError, WatchServerError } from "./alerts/index.ts";
import { ConfigError, demoNetworkPath, loadNetwork, type Network, networkJsonSchema } from "./config/index.ts";
import { IncidentKeeper, openFeeds, Recorder, RecordingError, replayRecordings } from "./ingest/index.ts";
import { type DisturbanceEvent, watchDisturbances } from "./pipeline/index.ts";
import { checkedScenario, namedScenario, ScenarioError, scenarioNames, serveNetwork, writeScenario } from "./simulator/index.ts";

const ONCE_LIMIT_MS = 60_000;
const refusals = [ConfigError, RecordingError, ScenarioError, ChannelError, StoreError, WatchServerError];

/** Logs go to standard error, so that standard output stays for what was asked for. */
const makeLog = (level = "info"): Logger =>
  pino({ level, base: null, timestamp: pino.stdTimeFunctions.isoTime }, pino.destination({ dest: 2, sync: true }));

const wholeNumber = (text: string): number => {
  const n = Number(text);
  if (!Number.isInteger(n) || n < 0) throw new InvalidArgumentError("a whole number is expected");
  return n;
};

const pair = (text: string, all: Map<string, string> = new Map()): Map<string, string> => {
  const at = text.indexOf("=");
  if (at < 1 || at === text.length - 1) throw new InvalidArgumentError("expected ID=VALUE");
  return new Map(all).set(text.slice(0, at), text.slice(at + 1));
};

/** The network with other addresses for some feeds. */
function readdressed(network: Network, addresses: ReadonlyMap<string, string>): Network {
  for (const id of addresses.keys()) {
    if (!network.feeds.some((f) => f.id === id))
      throw new RecordingError(
        "unknown-feed",
        `no feed "${id}" in ${network.name}; it has ${network.feeds.map((f) => f.id).join(", ")}`,
      );
  }
  return { ...network, feeds: network.feeds.map((f) => ({ ...f, address: addresses.get(f.id) ?? f.address })) };
}

/** Ends on Ctrl-C or a polite kill. */
function untilStopped(): { signal: AbortSignal; abort: () => void } {
  const stop = new AbortController();
  for (const name of ["SIGINT", "SIGTERM"] as const) process.once(name, () => stop.abort());
  return { signal: stop.signal, abort: () => stop.abort() };
}

interface WatchFlags {
  network?: string;
  demo?: boolean;
  once?: boolean;
  json?: boolean;
  port: number;
  data: string;
  address?: Map<string, string>;
  record?: string;
}

/** Starts the simulator as a process of its own; resolves with its feeds' addresses once they answer. */
async function startDemo(log: Logger): Promise<{ addresses: Map<string, string>; stop: () => Promise<void> }> {
  const child = spawn(
    process.execPath,
    [...process.execArgv, fileURLToPath(import.meta.url), "simulate", "--serve", "--ports", "system", "--json"],
    { stdio: ["ignore", "pipe", "inherit"] },
  );
  const ended = new Promise<void>((done) => child.once("exit", () => done()));
  const first = await new Promise<string>((done, fail) => {
    createInterface(child.stdout).once("line", done);
    child.once("exit", (code) => fail(new Error(`the simulator ended before it was ready (exit ${code})`)));
  });
  const { addresses } = JSON.parse(first) as { addresses: Record<string, string> };
  log.info({ feeds: Object.keys(addresses).length }, "simulator serves the demo network as a process of its own");
  return {
    addresses: new Map(Object.entries(addresses)),
    async stop() {
      child.kill("SIGTERM");
      await ended;
    },
  };
}

async function watch(flags: WatchFlags): Promise<number> {
  const log = makeLog(flags.json ? "warn" : "info");
  const stop = untilStopped();
  const demo = flags.demo ? await startDemo(log) : undefined;
  try {
    const network = readdressed(loadNetwork(flags.network ?? demoNetworkPath()), flags.address ?? demo?.addresses ?? new Map());
    const alerts = await openAlerts(network, {
      dataFolder: flags.data,
      port: flags.port,
      log,
      ...(flags.json ? {} : { terminal: process.stdout }),
    });
    const recorder = flags.record ? new Recorder(flags.record) : undefined;
    const feeds = openFeeds(network, { log, ...(recorder ? { recorder } : {}) });
    if (!flags.json) {
      process.stdout.write(
        `\nSpanmark watches ${network.name}: ${network.lines.length} lines, ${network.feeds.length} feeds.\nWatch page: ${alerts.url}\n`,
      );
      if (demo) process.stdout.write("Demo: all data is invented; the first fault comes within 20 seconds.\n");
      process.stdout.write("Ctrl-C ends it.\n\n");
    }
    let isFound = false;
    alerts.reports.subscribe(({ report, kind, publishedUs }) => {
      if (flags.json) process.stdout.write(`${JSON.stringify({ ...report, publishedUs })}\n`);
      if (!flags.once || kind !== "ended" || report.stage === "outside") return;
      isFound = true;
      stop.abort();
    });
    feeds.health.subscribe((health) => alerts.feeds(health));
    const disturbances = feeds.blocks.pipe(
      watchDisturbances(network, {
        clock: asyncScheduler,
        onProblem: ({ feedId, problem }) => log.warn({ feed: feedId }, problem),
      }),
    );
    const keeper = recorder ? new IncidentKeeper(recorder, log) : undefined;
    disturbances.subscribe((event) => {
      alerts.record(event);
      keeper?.note(event);
    });
    const limit = flags.once ? setTimeout(stop.abort, ONCE_LIMIT_MS) : undefined;
    if (!stop.signal.aborted)
      await new Promise<void>((done) => stop.signal.addEventListener("abort", () => done(), { once: true }));
    clearTimeout(limit);
    await feeds.stop();
    await keeper?.settle();
    await recorder?.close();
    await alerts.stop();
    if (flags.once && !isFound) {
      log.error(`no incident was complete within ${ONCE_LIMIT_MS / 1000} s`);
      return 1;
    }
    if (!flags.json) process.stdout.write("\nStopped.\n");
    return 0;
  } finally {
    await demo?.stop();
  }
}

interface RecordFlags {
  network: string;
  out: string;
  fileMb: number;
  fileMinutes: number;
  keepHours: number;
  keepGb: number;
  address?: Map<string, string>;
}

async function record(flags: RecordFlags): Promise<number> {
  const log = makeLog();
  const stop = untilStopped();
  const network = readdressed(loadNetwork(flags.network), flags.address ?? new Map());
  const recorder = new Recorder(flags.out, {
    fileBytes: flags.fileMb * 1e6,
    fileS: flags.fileMinutes * 60,
    keepS: flags.keepHours * 3600,
    keepBytes: flags.keepGb * 1e9,
  });
  const feeds = openFeeds(network, { log, recorder });
  log.info({ feeds: network.feeds.length, folder: flags.out }, "recording; Ctrl-C ends it");
  if (!stop.signal.aborted)
    await new Promise<void>((done) => stop.signal.addEventListener("abort", () => done(), { once: true }));
  await feeds.stop();
  await recorder.close();
  return 0;
}

function locate(flags: { network: string; feed: Map<string, string>; json?: boolean }): number {
  const network = loadNetwork(flags.network);
  const log = makeLog("warn");
  const reports = foldEvents(locatedIn(network, flags.feed, log), network);
  if (flags.json) for (const report of reports) process.stdout.write(`${JSON.stringify(report)}\n`);
  else
    process.stdout.write(
      reports.length === 0
        ? "No disturbance in these recordings.\n"
        : `${reports.map((r) => `${r.text}\n    ${r.reasons.join("; ")}`).join("\n")}\n`,
    );
  return 0;
}

function locatedIn(network: Network, files: ReadonlyMap<string, string>, log: Logger): DisturbanceEvent[] {
  const events: DisturbanceEvent[] = [];
  let failure: unknown;
  from(replayRecordings(network, files, log))
    .pipe(watchDisturbances(network, { onProblem: ({ feedId, problem }) => log.warn({ feed: feedId }, problem) }))
    .subscribe({
      next: (event) => events.push(event),
      error: (error) => {
        failure = error;
      },
    });
  if (failure !== undefined) throw failure;
  return events;
}

interface SimulateFlags {
  network?: string;
  list?: boolean;
  scenario?: string;
  out?: string;
  serve?: boolean;
  ports: "configured" | "system";
  seed: number;
  json?: boolean;
}

async function simulate(flags: SimulateFlags): Promise<number> {
  if (flags.list) {
    process.stdout.write(`${scenarioNames().join("\n")}\n`);
    return 0;
  }
  const network = loadNetwork(flags.network ?? demoNetworkPath());
  if (flags.serve) {
    const stop = untilStopped();
    await serveNetwork(network, {
      ports: flags.ports,
      firstFaultAfterS: 9,
      everyS: 30,
      seed: flags.seed,
      noise: 0.0005,
      instrumentErrors: 0.5,
      latencyMs: 30,
      signal: stop.signal,
      onReady: (addresses) =>
        process.stdout.write(
          flags.json
            ? `${JSON.stringify({ addresses })}\n`
            : `${Object.entries(addresses)
                .map(([id, a]) => `${id}  ${a}`)
                .join("\n")}\n`,
        ),
      onTruth: (truth) =>
        process.stdout.write(
          flags.json
            ? `${JSON.stringify({ truth })}\n`
            : `${truth.phases} on ${truth.line} at ${truth.km} km, ${truth.resistanceOhm} ohm, ${new Date(truth.onsetUs / 1000).toISOString()}\n`,
        ),
    });
    return 0;
  }
  if (!flags.scenario) throw new ScenarioError("name a scenario with --scenario (see --list), or --serve live units");
  const scenario = checkedScenario(namedScenario(flags.scenario), network);
  const folder = flags.out ?? join(tmpdir(), `spanmark-${flags.scenario}`);
  const { truth, recordings } = await writeScenario(network, scenario, folder);
  process.stdout.write(
    flags.json
      ? `${JSON.stringify({ folder, truth: truth ?? null, recordings: Object.fromEntries(recordings) })}\n`
      : `${recordings.size} recordings and truth.json in ${folder}\n`,
  );
  return 0;
}

function check(file: string | undefined, flags: { schema?: boolean }): number {
  if (flags.schema) {
    process.stdout.write(`${JSON.stringify(networkJsonSchema(), null, 2)}\n`);
    return 0;
  }
  const network = loadNetwork(file ?? demoNetworkPath());
  const measured = network.lines.map((line) => line.terminals.filter((t) => t.measured).length);
  process.stdout.write(
    `${network.name}: ${network.stations.length} stations, ${network.lines.length} lines, ${network.feeds.length} feeds, ${network.channels.length} channels.\n`,
  );
  network.lines.forEach((line, k) => {
    process.stdout.write(
      `  ${line.name} ${line.nominalKv} kV, ${line.lengthKm} km: measured at ${measured[k]} of ${line.terminals.length} ends, ${line.towers.length} towers\n`,
    );
  });
  if (!network.patrolCaution)
    process.stdout.write(
      '  Missing: patrolCaution, your own sentence on keeping distance; until then patrols read "keep the distance your rules give".\n',
    );
  return 0;
}

const program = new Command("spanmark")
  .description("Live fault location for transmission lines, from synchrophasor streams.")
  .version("0.1.0")
  .showHelpAfterError("(--help shows what there is)");

program
  .command("watch")
  .description("watch the feeds of a network: notice, locate, tell")
  .option("--network <file>", "network file")
  .option("--demo", "watch the invented demo network, served by a simulator of its own")
  .option("--once", "end after the first incident is complete; exit 1 when none came within a minute")
  .option("--json", "print incidents as JSON lines, each with publishedUs")
  .option("--port <number>", "of the watch page; 0 for any free one", wholeNumber, 8470)
  .option("--data <folder>", "where incidents are kept", "data")
  .option("--address <feed=address>", "another address for a feed, e.g. brack=tcp://127.0.0.1:4712; may be repeated", pair)
  .option("--record <folder>", "record all frames as they come, and keep each incident's")
  .addHelpText("after", "\nExamples:\n  spanmark watch --demo\n  spanmark watch --network ours.yaml --data /var/lib/spanmark")
  .action((flags: WatchFlags) => {
    if (!flags.demo && !flags.network) program.error("name a network with --network, or try --demo", { exitCode: 2 });
    return finish(watch(flags));
  });

program
  .command("record")
  .description("record the feeds of a network as they come, and nothing else")
  .requiredOption("--network <file>", "network file")
  .requiredOption("--out <folder>", "where to write them, a folder a feed")
  .option("--file-mb <number>", "a new file when one is larger [MB]", wholeNumber, 64)
  .option("--file-minutes <number>", "a new file when one spans more [min]", wholeNumber, 60)
  .option("--keep-hours <number>", "delete older files [h]", wholeNumber, 168)
  .option("--keep-gb <number>", "delete a feed's oldest files when it has more [GB]", wholeNumber, 20)
  .option("--address <feed=address>", "another address for a feed; may be repeated", pair)
  .addHelpText(
    "after",
    "\nExample:\n  spanmark record --network ours.yaml --out /var/lib/spanmark/recordings\nA feed's folder replays: spanmark locate --network ours.yaml --feed brack=/var/lib/spanmark/recordings/feeds/brack",
  )
  .action((flags: RecordFlags) => finish(record(flags)));

program
  .command("check")
  .description("check a network file, or print its JSON Schema")
  .argument("[file]", "network file; the demo network when left out")
  .option("--schema", "print the JSON Schema of network files")
  .action((file: string | undefined, flags: { schema?: boolean }) => finish(async () => check(file, flags)));

program
  .command("locate")
  .description("locate the faults in raw recordings")
  .requiredOption("--network <file>", "network file")
  .requiredOption(
    "--feed <id=recording>",
    "a feed's recording, its folder of recordings, or a capture (pcap, pcapng); may be repeated",
    pair,
  )
  .option("--json", "print one JSON object per incident")
  .addHelpText(
    "after",
    "\nExample:\n  spanmark locate --network ours.yaml --feed brack=brack.frames --feed tolva=tolva.frames --json",
  )
  .action((flags: { network: string; feed: Map<string, string>; json?: boolean }) => finish(async () => locate(flags)));

program
  .command("simulate")
  .description("serve or record invented streams, for trials, drills and tests")
  .option("--network <file>", "network file; the demo network when left out")
  .option("--list", "list the scenarios")
  .option("--scenario <name>", "write this scenario's recordings and its truth")
  .option("--out <folder>", "where to write them")
  .option("--serve", "serve live units on loopback, with a fault now and then")
  .option("--ports <which>", "of --serve: configured (in the network file) or system (any free ones)", "configured")
  .option("--seed <number>", "of all random numbers", wholeNumber, 1)
  .option("--json", "print for a program")
  .action((flags: SimulateFlags) => finish(simulate(flags)));

/** Sets the exit code; a refusal is one line, a defect of ours keeps its stack. */
async function finish(work: Promise<number> | (() => Promise<number>)): Promise<void> {
  try {
    process.exitCode = await (typeof work === "function" ? work() : work);
  } catch (error) {
    const isRefusal = refusals.some((kind) => error instanceof kind);
    process.stderr.write(`${isRefusal ? (error as Error).message : ((error as Error).stack ?? String(error))}\n`);
    process.exitCode = isRefusal ? 2 : 1;
  }
}

await program.parseAsync();
