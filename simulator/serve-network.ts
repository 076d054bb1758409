/**
 * Serves a network's units live: one C37.118.2 server over TCP for each feed, frames paced by the wall clock, a fault now and then. Loopback only.
 */
import { createServer, type Server, type Socket } from "node:net";
import type { Network } from "../config/index.ts";
import { decodeCommand, encodeConfig, encodeData, encodeHeader, Framer, typeOf } from "../ingest/index.ts";
import { LineCourse, MeasuredEnd } from "./course.ts";
import type { Fault } from "./line-model.ts";
import { randomFrom } from "./random.ts";
import { sourcesOf } from "./sources.ts";
import { type Truth, truthOf } from "./truth.ts";

export interface ServeOptions {
  /** "configured": the ports of the network file; "system": any free ones, told by `onReady`. */
  readonly ports: "configured" | "system";
  readonly firstFaultAfterS: number;
  readonly everyS: number;
  readonly seed: number;
  readonly noise: number;
  readonly instrumentErrors: number;
  /** Time a frame takes after its window is complete: computation, network. */
  readonly latencyMs: number;
  readonly onReady: (addresses: Readonly<Record<string, string>>) => void;
  readonly onTruth: (truth: Truth) => void;
  readonly signal: AbortSignal;
}

/** Demo faults in turn: another line and another kind each time. [line, type, share of the line, ohm, opening at each end after the onset] */
const CYCLE: readonly (readonly [string, Fault["type"], number, number, readonly [number, number]])[] = [
  ["brack-tolva", "AG", 0.2787, 4, [0.07, 0.074]],
  ["tolva-quenby-1", "BC", 0.61, 1, [0.062, 0.066]],
  ["ister-nolde", "CG", 0.33, 8, [0.075, 0.085]],
  ["quenby-ister-2", "ABC", 0.645, 1, [0.055, 0.06]],
  ["brack-tolva", "CAG", 0.72, 10, [0.068, 0.063]],
  ["tolva-quenby-2", "BG", 0.17, 15, [0.08, 0.085]],
];
/** A tripped line is switched in again after this, one end after the other. */
const BACK_AFTER_S = 12;
const SECOND_END_AFTER_S = 1.5;
/** A fault is planned this long before it happens: solving takes a fraction of a second. */
const AHEAD_S = 3;
const TICK_MS = 8;
/** A client that does not read is let go at this much unsent. */
const UNSENT_BYTES = 1024 * 1024;

interface Served {
  readonly end: MeasuredEnd;
  readonly server: Server;
  readonly listeners: Map<Socket, { isOn: boolean }>;
  nextSlot: number;
}

/** Resolves when `signal` aborts and everything is closed. */
export async function serveNetwork(network: Network, options: ServeOptions): Promise<void> {
  const nowUs = () => Date.now() * 1000;
  const courses = new Map(network.lines.map((line) => [line.id, new LineCourse(line, network.frequencyHz, sourcesOf(line))]));
  const served: Served[] = [];
  const addresses: Record<string, string> = {};
  for (const line of network.lines) {
    for (const terminal of line.terminals) {
      if (!terminal.measured) continue;
      const end = new MeasuredEnd(network, courses.get(line.id)!, terminal, {
        ...options,
        seed: options.seed * 1000 + served.length,
      });
      const listeners: Served["listeners"] = new Map();
      const server = createServer((socket) => attend(socket, end, listeners, nowUs));
      const configured = Number(new URL(network.feeds.find((f) => f.id === end.feedId)!.address).port);
      await listen(server, options.ports === "configured" ? configured : 0);
      addresses[end.feedId] = `tcp://127.0.0.1:${(server.address() as { port: number }).port}`;
      served.push({ end, server, listeners, nextSlot: Math.ceil(nowUs() / end.periodUs) });
    }
  }
  options.onReady(addresses);

  const random = randomFrom(options.seed);
  const cycle = CYCLE.filter(([id]) => courses.has(id));
  const todo: { atUs: number; run: () => void }[] = [];
  let nextFaultUs = nowUs() + options.firstFaultAfterS * 1e6;
  let turn = 0;
  const planFault = () => {
    const [id, type, share, ohm, open] = cycle[turn++ % cycle.length]!;
    const course = courses.get(id)!;
    const atUs = Math.round(nextFaultUs + random.uniform() * 1e6);
    nextFaultUs += options.everyS * 1e6;
    if (!course.isClosed) return;
    const fault: Fault = { type, km: Number((share * course.line.lengthKm).toFixed(1)), ohm };
    const never = [Number.POSITIVE_INFINITY, Number.POSITIVE_INFINITY] as const;
    options.onTruth(truthOf(course.line, fault, atUs, course.plan(atUs, fault, open, never)));
    const backUs = atUs + BACK_AFTER_S * 1e6;
    todo.push({ atUs: backUs - AHEAD_S * 1e6, run: () => void course.plan(backUs, undefined, never, [0, SECOND_END_AFTER_S]) });
  };
  const tick = () => {
    const now = nowUs();
    if (cycle.length > 0 && now >= nextFaultUs - AHEAD_S * 1e6) planFault();
    for (const item of todo.filter((x) => now >= x.atUs)) {
      todo.splice(todo.indexOf(item), 1);
      item.run();
    }
    for (const one of served) sendDue(one, now - options.latencyMs * 1000);
  };
  const timer = setInterval(tick, TICK_MS);
  await new Promise<void>((done) => {
    if (options.signal.aborted) done();
    else options.signal.addEventListener("abort", () => done(), { once: true });
  });
  clearInterval(timer);
  await Promise.all(
    served.map(({ server, listeners }) => {
      for (const socket of listeners.keys()) socket.destroy();
      return new Promise<void>((done) => server.close(() => done()));
    }),
  );
}

function listen(server: Server, port: number): Promise<void> {
  return new Promise((done, fail) => {
    server.once("error", fail);
    server.listen(port, "127.0.0.1", () => done());
  });
}

/** Frames whose window is complete by `untilUs`. */
function sendDue(one: Served, untilUs: number): void {
  const { end, listeners } = one;
  for (; one.nextSlot * end.periodUs + end.halfWindowS * 1e6 <= untilUs; one.nextSlot++) {
    const timeUs = Math.round(one.nextSlot * end.periodUs);
    const measured = end.measure(timeUs);
    let frame: Buffer | undefined;
    for (const [socket, { isOn }] of listeners) {
      if (!isOn) continue;
      frame ??= encodeData(end.config, timeUs, [{ stat: 0, ...measured }]);
      if (socket.writableLength > UNSENT_BYTES) socket.destroy();
      else socket.write(frame);
    }
  }
}

/** Answers a client's commands. */
function attend(socket: Socket, end: MeasuredEnd, listeners: Served["listeners"], nowUs: () => number): void {
  const state = { isOn: false };
  listeners.set(socket, state);
  socket.setNoDelay(true);
  const framer = new Framer({
    frame(bytes, at) {
      if (typeOf(bytes[at + 1]!) !== "command") return;
      const command = decodeCommand(bytes, at);
      if (command === "data-on") state.isOn = true;
      else if (command === "data-off") state.isOn = false;
      else if (command === "send-configuration-1") socket.write(encodeConfig(end.config, "configuration-1", nowUs()));
      else if (command === "send-configuration-2") socket.write(encodeConfig(end.config, "configuration-2", nowUs()));
      else if (command === "send-header")
        socket.write(encodeHeader(end.config.idCode, "Spanmark simulator: invented data", nowUs()));
    },
    defect() {},
  });
  socket.on("data", (chunk) => framer.push(chunk));
  socket.on("error", () => socket.destroy());
  socket.on("close", () => listeners.delete(socket));
}
