/** Puts header and CRC around a frame's body. */
import { crcCcitt } from "./checksum.ts";
import { type FrameType, frameHeader, LARGEST_FRAME_BYTES, syncWord } from "./common-header.ts";

export const BODY_AT = frameHeader.size;

/** Writes header and CRC of a frame of `size` bytes whose body already stands at 14. */
export function finishFrame(
  frame: Buffer,
  size: number,
  type: FrameType,
  idCode: number,
  time: { socS: number; fracSec: number },
): void {
  if (size > LARGEST_FRAME_BYTES)
    throw new RangeError(`a frame of ${size} bytes: the standard's size field ends at ${LARGEST_FRAME_BYTES}; split the stream`);
  const view = new DataView(frame.buffer, frame.byteOffset, frame.byteLength);
  frameHeader.write(view, 0, { sync: syncWord(type), frameSizeBytes: size, idCode, ...time });
  view.setUint16(size - 2, crcCcitt(frame, 0, size - 2));
}
