/** A unit for tests: a real TCP server that answers commands and sends what a test hands it. */
import { createServer, type Socket } from "node:net";
import { decodeCommand, encodeConfig, encodeData, Framer, type StreamConfig, typeOf } from "../../ingest/index.ts";

export interface UnitPeer {
  readonly address: string;
  /** Sends bytes to every client that has asked for data. */
  send(bytes: Uint8Array): void;
  /** Resolves when a client has asked for data. */
  asked(): Promise<void>;
  /** Drops every client. */
  drop(): void;
  close(): Promise<void>;
}

export function streamOf(
  idCode: number,
  names: readonly string[] = ["VA", "VB", "VC", "IA", "IB", "IC"],
  reportingRateHz = 60,
): StreamConfig {
  return {
    idCode,
    timeBase: 1_000_000,
    reportingRateHz,
    units: [
      {
        name: "unit",
        idCode,
        phasorsArePolar: false,
        phasorsAreFloat: true,
        analogsAreFloat: true,
        frequencyIsFloat: true,
        phasors: names.map((name, k) => ({ name, kind: k < 3 ? "voltage" : "current", perBit: 1 })),
        analogs: [],
        digitals: [],
        nominalHz: 60,
        configurationCount: 1,
      },
    ],
  };
}

/** Frame number `slot` since a fixed second. */
export function frameOf(config: StreamConfig, slot: number): Buffer {
  const phasors = new Float64Array(config.units[0]!.phasors.length * 2).fill(100);
  return encodeData(config, 1_772_590_440e6 + Math.round((slot * 1e6) / config.reportingRateHz), [
    { stat: 0, phasors, frequencyHz: 60, rocofHzPerS: 0 },
  ]);
}

export async function startUnit(config: StreamConfig): Promise<UnitPeer> {
  const on = new Set<Socket>();
  const clients = new Set<Socket>();
  let waiting: (() => void)[] = [];
  const server = createServer((socket) => {
    clients.add(socket);
    const framer = new Framer({
      frame(bytes, at) {
        if (typeOf(bytes[at + 1]!) !== "command") return;
        const command = decodeCommand(bytes, at);
        if (command === "send-configuration-2") socket.write(encodeConfig(config, "configuration-2", 1_772_590_440e6));
        if (command === "data-off") on.delete(socket);
        if (command === "data-on") {
          on.add(socket);
          for (const done of waiting.splice(0)) done();
        }
      },
      defect() {},
    });
    socket.on("data", (chunk) => framer.push(chunk));
    socket.on("error", () => socket.destroy());
    socket.on("close", () => {
      on.delete(socket);
      clients.delete(socket);
    });
  });
  await new Promise<void>((done) => server.listen(0, "127.0.0.1", done));
  return {
    address: `tcp://127.0.0.1:${(server.address() as { port: number }).port}`,
    send(bytes) {
      for (const socket of on) socket.write(bytes);
    },
    asked: () => (on.size > 0 ? Promise.resolve() : new Promise((done) => waiting.push(done))),
    drop() {
      for (const socket of clients) socket.destroy();
    },
    close() {
      waiting = [];
      for (const socket of clients) socket.destroy();
      return new Promise((done) => server.close(() => done()));
    },
  };
}
