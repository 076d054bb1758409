/**
 * Measuring units for the benchmark, a process of its own: one server; each connection's IDCODE is that of its commands. The units' frames are spread over
 * the reporting period, as delays in a network spread them. In place of ROCOF a frame says when it was sent (µs after its tag), in place of the frequency its
 * number. A frame that is more than two periods late is not sent: a machine too small for the sender then shows as fewer frames sent, not as a queue.
 */
import { createServer, type Socket } from "node:net";
import { crcCcitt, decodeCommand, encodeConfig, encodeData, Framer, typeOf } from "../../../ingest/index.ts";
import { sixPhasors } from "./memory.ts";

const isIdle = process.argv[2] === "idle";
const RATE_HZ = 60;
const PERIOD_US = 1e6 / RATE_HZ;
const nowUs = () => (performance.timeOrigin + performance.now()) * 1000;

interface Unit {
  readonly socket: Socket;
  readonly frame: Buffer;
  readonly phaseUs: number;
  nextSlot: number;
  sent: number;
}
const units = new Map<Socket, Unit>();
let count = 0;

const server = createServer((socket) => {
  socket.setNoDelay(true);
  socket.on("error", () => socket.destroy());
  socket.on("close", () => units.delete(socket));
  const framer = new Framer({
    frame(bytes, at) {
      if (typeOf(bytes[at + 1]!) !== "command") return;
      const idCode = (bytes[at + 4]! << 8) | bytes[at + 5]!;
      const command = decodeCommand(bytes, at);
      if (command === "send-configuration-2") socket.write(encodeConfig(sixPhasors(idCode), "configuration-2", nowUs()));
      if (command === "data-off") units.delete(socket);
      if (command !== "data-on" || isIdle) return;
      const phasors = new Float64Array(12).fill(1);
      const frame = encodeData(sixPhasors(idCode), 0, [{ stat: 0, phasors, frequencyHz: 60, rocofHzPerS: 0 }]);
      // The golden ratio spreads any number of units evenly.
      const phaseUs = ((count++ * 0.618034) % 1) * PERIOD_US;
      units.set(socket, { socket, frame, phaseUs, nextSlot: Math.ceil(nowUs() / PERIOD_US) + 1, sent: 0 });
    },
    defect() {},
  });
  socket.on("data", (chunk) => framer.push(chunk));
});

function send(unit: Unit, now: number): void {
  const { frame } = unit;
  const tagUs = Math.round(unit.nextSlot * PERIOD_US);
  const socS = Math.floor(tagUs / 1e6);
  frame.writeUInt32BE(socS, 6);
  frame.writeUInt32BE(tagUs - socS * 1e6, 10);
  frame.writeFloatBE(unit.sent, frame.length - 10);
  frame.writeFloatBE(now - tagUs, frame.length - 6);
  frame.writeUInt16BE(crcCcitt(frame, 0, frame.length - 2), frame.length - 2);
  unit.socket.write(Buffer.from(frame));
  unit.nextSlot++;
  unit.sent++;
}

function turn(): void {
  for (const unit of units.values()) {
    let now = nowUs();
    if (now - unit.nextSlot * PERIOD_US - unit.phaseUs > 2 * PERIOD_US)
      unit.nextSlot = Math.floor((now - unit.phaseUs) / PERIOD_US);
    while (unit.nextSlot * PERIOD_US + unit.phaseUs <= now) {
      send(unit, now);
      now = nowUs();
    }
  }
}
if (!isIdle) setInterval(turn, 1);
process.on("disconnect", () => process.exit(0));
server.listen({ port: 0, host: "127.0.0.1", backlog: 4096 }, () =>
  process.send!({ port: (server.address() as { port: number }).port }),
);
