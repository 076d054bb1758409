/**
 * Serves the watch page and keeps every open page at the newest state over a WebSocket. Loopback only for now: elsewhere nobody could be told apart, and
 * anybody could acknowledge.
 */
import { createReadStream, existsSync, statSync } from "node:fs";
import { createServer, type IncomingMessage, type ServerResponse } from "node:http";
import { dirname, extname, join, normalize, sep } from "node:path";
import { fileURLToPath } from "node:url";
import { type WebSocket, WebSocketServer } from "ws";
import { z } from "zod";
import type { ToPage } from "./protocol.ts";

/** A page that is this far behind gets no more until it has caught up, and then the newest state, not the backlog. */
const BEHIND_BYTES = 512 * 1024;
const LARGEST_MESSAGE_BYTES = 4096;
const CONTENT_TYPES: Readonly<Record<string, string>> = {
  ".html": "text/html; charset=utf-8",
  ".js": "text/javascript; charset=utf-8",
  ".css": "text/css; charset=utf-8",
  ".svg": "image/svg+xml",
  ".json": "application/json",
};
const HEADERS = {
  "Content-Security-Policy":
    "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; connect-src 'self'; base-uri 'none'; form-action 'none'; frame-ancestors 'none'",
  "X-Content-Type-Options": "nosniff",
  "Referrer-Policy": "no-referrer",
  "Cache-Control": "no-cache",
};

const toServer = z.strictObject({
  kind: z.literal("acknowledge"),
  incident: z.string().max(8),
  by: z.string().trim().min(1).max(80),
});

export class WatchServerError extends Error {}

export interface WatchServerOptions {
  /** 0: any free one. */
  readonly port: number;
  readonly hello: () => ToPage;
  /** Somebody has seen an incident; returns in words why it is refused. */
  readonly acknowledge: (incident: string, by: string) => string | undefined;
  /** What `/healthz` answers. */
  readonly health: () => Readonly<Record<string, unknown>>;
}

export interface WatchServer {
  readonly url: string;
  /** To every page that keeps up; one that is behind is sent a fresh hello when it has caught up. */
  tell(message: ToPage): void;
  stop(): Promise<void>;
}

/** Folder of the built page, found from the sources and from the built program. */
function pageFolder(): string {
  for (let folder = dirname(fileURLToPath(import.meta.url)); ; folder = dirname(folder)) {
    const page = join(folder, "dist", "page");
    if (existsSync(join(page, "index.html"))) return page;
    if (folder === dirname(folder)) throw new WatchServerError("the watch page is not built: run `npm run build`");
  }
}

export async function startWatchServer(options: WatchServerOptions): Promise<WatchServer> {
  const folder = pageFolder();
  const server = createServer((request, response) => answer(request, response, folder, options));
  const sockets = new WebSocketServer({ noServer: true, maxPayload: LARGEST_MESSAGE_BYTES, perMessageDeflate: false });
  const behind = new Set<WebSocket>();
  let own = "";
  server.on("upgrade", (request, socket, head) => {
    // A page of another origin must not read the room's state or acknowledge for somebody.
    const origin = request.headers.origin;
    if (request.url !== "/live" || (origin !== undefined && origin !== own && origin !== own.replace("127.0.0.1", "localhost"))) {
      // The peer may be gone already; nobody else listens for that here.
      socket.on("error", () => socket.destroy());
      socket.end("HTTP/1.1 403 Forbidden\r\nConnection: close\r\n\r\n");
      return;
    }
    sockets.handleUpgrade(request, socket, head, (ws) => {
      ws.on("error", () => ws.terminate());
      ws.on("message", (data) => hear(ws, String(data), options));
      ws.on("close", () => behind.delete(ws));
      ws.send(JSON.stringify(options.hello()));
    });
  });
  await new Promise<void>((done, fail) => {
    server.once("error", (cause: NodeJS.ErrnoException) => {
      const words =
        cause.code === "EADDRINUSE"
          ? `port ${options.port} is taken: choose another with --port, or 0 for any free one`
          : cause.message;
      fail(new WatchServerError(`the watch page cannot be served: ${words}`, { cause }));
    });
    server.listen(options.port, "127.0.0.1", () => done());
  });
  own = `http://127.0.0.1:${(server.address() as { port: number }).port}`;
  return {
    url: `${own}/`,
    tell(message) {
      const text = JSON.stringify(message);
      for (const ws of sockets.clients) {
        if (ws.readyState !== ws.OPEN) continue;
        if (ws.bufferedAmount > BEHIND_BYTES) behind.add(ws);
        else if (behind.delete(ws)) ws.send(JSON.stringify(options.hello()));
        else ws.send(text);
      }
    },
    async stop() {
      for (const ws of sockets.clients) ws.terminate();
      server.closeAllConnections();
      await new Promise<void>((done) => server.close(() => done()));
    },
  };
}

function hear(ws: WebSocket, text: string, options: WatchServerOptions): void {
  let parsed: unknown;
  try {
    parsed = JSON.parse(text);
  } catch {
    ws.close(1003, "not JSON");
    return;
  }
  const read = toServer.safeParse(parsed);
  const refusal = read.success ? acknowledge(read.data.incident, read.data.by, options) : z.prettifyError(read.error);
  if (refusal !== undefined) ws.send(JSON.stringify({ kind: "refused", reason: refusal }));
}

function acknowledge(incident: string, by: string, options: WatchServerOptions): string | undefined {
  try {
    return options.acknowledge(incident, by);
  } catch (error) {
    return `the acknowledgement of ${incident} could not be stored: ${(error as Error).message}. See the data folder's disk`;
  }
}

/** Decoded; one that cannot be read names nothing here. */
function pathOf(request: IncomingMessage): string {
  try {
    return decodeURIComponent(new URL(request.url ?? "/", "http://x").pathname);
  } catch {
    return "";
  }
}

function answer(request: IncomingMessage, response: ServerResponse, folder: string, options: WatchServerOptions): void {
  const path = pathOf(request);
  if (request.method !== "GET" && request.method !== "HEAD") {
    response.writeHead(405, { ...HEADERS, Allow: "GET, HEAD" }).end();
    return;
  }
  if (path === "/healthz") {
    response.writeHead(200, { ...HEADERS, "Content-Type": "application/json" }).end(JSON.stringify(options.health()));
    return;
  }
  const file = normalize(join(folder, path === "/" ? "index.html" : path));
  if (!file.startsWith(folder + sep) || !existsSync(file) || !statSync(file).isFile()) {
    response
      .writeHead(404, { ...HEADERS, "Content-Type": "text/plain; charset=utf-8" })
      .end("Nothing here. The watch page is at /");
    return;
  }
  response.writeHead(200, { ...HEADERS, "Content-Type": CONTENT_TYPES[extname(file)] ?? "application/octet-stream" });
  if (request.method === "HEAD") response.end();
  else createReadStream(file).pipe(response);
}
