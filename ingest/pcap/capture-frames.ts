/** Frames of C37.118.2 in a capture, whatever else it holds: every TCP direction and every UDP source has its own framer. */
import { type FrameDefect, Framer } from "../c37118/index.ts";
import { ByteSource } from "./byte-source.ts";
import { packetsOf } from "./packets.ts";
import { segmentOf } from "./segment.ts";
import { TcpAssembler } from "./tcp-assembler.ts";

/** A capture of a whole control centre holds fewer; further ones are left unread. */
const LARGEST_FLOWS = 16_384;

interface Flow {
  readonly framer: Framer;
  readonly assembler: TcpAssembler;
}

/**
 * Whole frames with a good CRC, of all IDCODEs and types, in the order in which they became whole.
 * @param file  open for reading
 * @param onDefect  of connections that hold such frames, and of the capture itself
 */
export function* captureFrames(file: number, onDefect: (code: FrameDefect, words: string) => void): Generator<Buffer> {
  const flows = new Map<string, Flow>();
  const ready: Buffer[] = [];
  const open = (name: string): Flow => {
    let holdsFrames = false;
    const framer = new Framer({
      frame(bytes, at, size) {
        holdsFrames = true;
        ready.push(Buffer.from(bytes.subarray(at, at + size)));
      },
      defect(code, offset, skipped) {
        if (holdsFrames) onDefect(code, `${skipped} bytes skipped at byte ${offset} of ${name.slice(0, 3).toUpperCase()} stream`);
      },
    });
    const assembler = new TcpAssembler({ bytes: (payload) => framer.push(payload), gap: () => framer.end() });
    const flow = { framer, assembler };
    flows.set(name, flow);
    return flow;
  };
  for (const packet of packetsOf(new ByteSource(file), (words) => onDefect("truncated", words))) {
    const segment = segmentOf(packet);
    if (!segment) continue;
    const flow = flows.get(segment.flow) ?? (flows.size < LARGEST_FLOWS ? open(segment.flow) : undefined);
    if (segment.transport === "tcp") flow?.assembler.take(segment.sequence, segment.isFirst, segment.payload);
    else {
      flow?.framer.push(segment.payload);
      flow?.framer.end(); // a datagram holds whole frames
    }
    yield* ready.splice(0);
  }
  for (const { assembler, framer } of flows.values()) {
    assembler.end();
    framer.end();
    yield* ready.splice(0);
  }
}
