/** The page's state, kept at the server's newest by one WebSocket that comes back by itself. */
import { computed, signal } from "@preact/signals";
import type { FeedView, ToPage, ToServer, WatchedIncident, WatchedNetwork } from "../protocol.ts";

export const network = signal<WatchedNetwork | undefined>(undefined);
export const incidents = signal<readonly WatchedIncident[]>([]);
export const feeds = signal<ReadonlyMap<string, FeedView>>(new Map());
export const caution = signal("");
export const cautionBlock = signal("");
export const undelivered = signal(0);
export const refusal = signal("");
/** The server's clock as this page reckons it: last message's time plus what has passed since. */
export const serverNowMs = signal(0);
/** Seconds since the server was last heard; its claims are covered when this grows. */
export const silentS = signal(0);
export const chosen = signal<string | undefined>(undefined);

/** The pulse comes every second: three missed is news, long before claims are fifteen seconds old. */
const LOST_AFTER_S = 3.5;
export const isLost = computed(() => silentS.value > LOST_AFTER_S);

let serverAtMs = 0;
let heardAtMs = performance.now();
let socket: WebSocket | undefined;

export function connect(): void {
  open();
  setInterval(() => {
    const sinceMs = performance.now() - heardAtMs;
    silentS.value = sinceMs / 1000;
    serverNowMs.value = serverAtMs === 0 ? 0 : serverAtMs + sinceMs;
  }, 250);
}

function open(): void {
  socket = new WebSocket(`${location.protocol === "https:" ? "wss" : "ws"}://${location.host}/live`);
  socket.onmessage = (event) => hear(JSON.parse(String(event.data)) as ToPage);
  socket.onclose = () => {
    setTimeout(open, 1000);
  };
}

function hear(message: ToPage): void {
  if (message.kind === "refused") {
    refusal.value = message.reason;
    return;
  }
  heardAtMs = performance.now();
  serverAtMs = message.serverTimeUs / 1000;
  serverNowMs.value = serverAtMs;
  silentS.value = 0;
  if (message.kind === "hello") {
    network.value = message.network;
    incidents.value = message.incidents;
    feeds.value = byId(message.feeds);
    caution.value = message.caution;
    cautionBlock.value = message.cautionBlock;
  } else if (message.kind === "pulse") {
    feeds.value = byId(message.feeds);
    undelivered.value = message.undelivered;
  } else {
    const others = incidents.value.filter((i) => i.incident !== message.incident.incident);
    incidents.value = [message.incident, ...others].sort((p, q) => q.onsetUs - p.onsetUs);
  }
}

const byId = (list: readonly FeedView[]): ReadonlyMap<string, FeedView> => new Map(list.map((f) => [f.feedId, f]));

export function send(message: ToServer): void {
  refusal.value = "";
  if (socket?.readyState === WebSocket.OPEN) socket.send(JSON.stringify(message));
  else refusal.value = "not connected to the server: nothing was sent";
}
