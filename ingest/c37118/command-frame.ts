/** Commands to a unit. Source: IEEE C37.118.2-2011, clause 6.6, table 15 (from memory). */
import { LARGEST_FRAME_BYTES, timeFields } from "./common-header.ts";
import { BODY_AT, finishFrame } from "./frame-writer.ts";

export const commands = {
  "data-off": 1,
  "data-on": 2,
  "send-header": 3,
  "send-configuration-1": 4,
  "send-configuration-2": 5,
  "send-configuration-3": 6,
  extended: 8,
} as const;
export type Command = keyof typeof commands;

const TIME_BASE = 1_000_000;
const NOTHING = new Uint8Array(0);

/** @param extension  of an extended command, as unit and user agreed on it */
export function encodeCommand(idCode: number, command: Command, timeUs: number, extension: Uint8Array = NOTHING): Buffer {
  if (extension.length > LARGEST_FRAME_BYTES - BODY_AT - 4 || (extension.length > 0 && command !== "extended"))
    throw new RangeError(`${extension.length} bytes of extension with command "${command}"`);
  const frame = Buffer.alloc(BODY_AT + 4 + extension.length);
  frame.writeUInt16BE(commands[command], BODY_AT);
  frame.set(extension, BODY_AT + 2);
  finishFrame(frame, frame.length, "command", idCode, timeFields(timeUs, TIME_BASE));
  return frame;
}

/** Undefined for a reserved command. */
export function decodeCommand(frame: Uint8Array, at = 0): Command | undefined {
  const word = (frame[at + BODY_AT]! << 8) | frame[at + BODY_AT + 1]!;
  return (Object.keys(commands) as Command[]).find((name) => commands[name] === word);
}

/** What follows the command's word; empty for all but extended commands. */
export const commandExtension = (frame: Uint8Array, at = 0, size = frame.length): Uint8Array =>
  frame.subarray(at + BODY_AT + 2, at + size - 2);
