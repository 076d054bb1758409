/**
 * Packets of a capture file, classic or next generation, either byte order. Sources: the IETF drafts draft-ietf-opsawg-pcap and
 * draft-ietf-opsawg-pcapng (from memory); test/ingest checks what we read against capinfos and tshark.
 */
import type { ByteSource } from "./byte-source.ts";

export interface Packet {
  /** LINKTYPE_ number. */
  readonly linkType: number;
  /** Valid until the next packet is asked for. */
  readonly bytes: Buffer;
}

/** What stands at a capture's start. */
const CLASSIC = new Set([0xa1b2c3d4, 0xd4c3b2a1, 0xa1b23c4d, 0x4d3cb2a1]);
const SECTION = 0x0a0d0d0a;
const BYTE_ORDER = 0x1a2b3c4d;
const blockTypes = { interface: 1, simple: 3, enhanced: 6 } as const;
/** No link carries larger packets; a length beyond it is a damaged file. */
const LARGEST_BYTES = 1024 * 1024;

export const isCapture = (start: Buffer): boolean =>
  start.length >= 4 && (CLASSIC.has(start.readUInt32BE(0)) || start.readUInt32BE(0) === SECTION);

/** @param onDamage  in words; what follows the damage is not read */
export function* packetsOf(source: ByteSource, onDamage: (words: string) => void): Generator<Packet> {
  const magic = source.take(4);
  if (!magic) return;
  if (magic.readUInt32BE(0) === SECTION) yield* nextGeneration(source, onDamage);
  else yield* classic(source, magic[0] !== 0xa1, onDamage);
}

function* classic(source: ByteSource, isLittle: boolean, onDamage: (words: string) => void): Generator<Packet> {
  const head = source.take(20);
  if (!head) return onDamage("the capture ends within its head");
  const linkType = u32(head, 16, isLittle) & 0xffff;
  while (!source.isAtEnd) {
    const record = source.take(16);
    if (!record) return onDamage("the capture ends within a packet");
    const size = u32(record, 8, isLittle);
    if (size > LARGEST_BYTES) return onDamage(`a packet of ${size} bytes: the capture is damaged there`);
    const bytes = source.take(size);
    if (!bytes) return onDamage("the capture ends within a packet");
    yield { linkType, bytes };
  }
}

/** After the first section's type. */
function* nextGeneration(source: ByteSource, onDamage: (words: string) => void): Generator<Packet> {
  let isLittle = false;
  let linkTypes: number[] = [];
  let snapLengths: number[] = [];
  let type = SECTION;
  for (;;) {
    const head = source.take(type === SECTION ? 8 : 4);
    if (!head) return onDamage("the capture ends within a block");
    if (type === SECTION) {
      isLittle = head.readUInt32LE(4) === BYTE_ORDER;
      if (!isLittle && head.readUInt32BE(4) !== BYTE_ORDER) return onDamage("a section without its byte order mark");
      linkTypes = [];
      snapLengths = [];
    }
    const rest = u32(head, 0, isLittle) - (type === SECTION ? 12 : 8);
    if (rest < 4 || rest > LARGEST_BYTES || rest % 4 !== 0) return onDamage("a block of an impossible length");
    const body = source.take(rest);
    if (!body) return onDamage("the capture ends within a block");
    if (type === blockTypes.interface && rest >= 12) {
      linkTypes.push(isLittle ? body.readUInt16LE(0) : body.readUInt16BE(0));
      snapLengths.push(u32(body, 4, isLittle) || LARGEST_BYTES);
    } else if (type === blockTypes.enhanced && rest >= 24) {
      const linkType = linkTypes[u32(body, 0, isLittle)];
      const size = u32(body, 12, isLittle);
      if (linkType !== undefined && 20 + size <= rest - 4) yield { linkType, bytes: body.subarray(20, 20 + size) };
    } else if (type === blockTypes.simple && rest >= 8 && linkTypes[0] !== undefined) {
      const size = Math.min(u32(body, 0, isLittle), snapLengths[0]!, rest - 8);
      yield { linkType: linkTypes[0], bytes: body.subarray(4, 4 + size) };
    }
    if (source.isAtEnd) return;
    const next = source.take(4);
    if (!next) return onDamage("the capture ends within a block");
    type = u32(next, 0, isLittle);
  }
}

const u32 = (bytes: Buffer, at: number, isLittle: boolean): number =>
  isLittle ? bytes.readUInt32LE(at) : bytes.readUInt32BE(at);
