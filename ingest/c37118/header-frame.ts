/** Header frames: free text about a stream. Source: IEEE C37.118.2-2011, clause 6.5 (from memory). */
import { timeFields } from "./common-header.ts";
import { BODY_AT, finishFrame } from "./frame-writer.ts";

export function encodeHeader(idCode: number, text: string, timeUs: number): Buffer {
  const body = Buffer.from(text, "utf8");
  const frame = Buffer.alloc(BODY_AT + body.length + 2);
  body.copy(frame, BODY_AT);
  finishFrame(frame, frame.length, "header", idCode, timeFields(timeUs, 1_000_000));
  return frame;
}

export const decodeHeader = (frame: Uint8Array, at = 0, size = frame.length): string =>
  Buffer.from(frame.subarray(at + BODY_AT, at + size - 2)).toString("utf8");
