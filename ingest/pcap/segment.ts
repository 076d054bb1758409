/**
 * What a packet carries of a TCP connection or in a UDP datagram. Sources: RFC 791, 8200, 9293, 768 and the LINKTYPE_ list (from memory). Checksums are
 * not looked at: captures taken on the sending machine hold none, and each frame has its own.
 */
import type { Packet } from "./packets.ts";

export interface Segment {
  /** Same for all packets of one direction between two endpoints. */
  readonly flow: string;
  readonly transport: "tcp" | "udp";
  /** TCP: of the first payload byte. */
  readonly sequence: number;
  /** TCP: this packet begins a connection. */
  readonly isFirst: boolean;
  readonly payload: Buffer;
}

const IPV4 = 0x0800;
const IPV6 = 0x86dd;
const vlanTags = new Set([0x8100, 0x88a8]);
/** Extension headers that stand between IPv6 and its payload: hop by hop, routing, destination. */
const passedOver = new Set([0, 43, 60]);

/** Undefined for everything else, for fragments of IP, and for packets that were cut short before their payload. */
export function segmentOf({ linkType, bytes }: Packet): Segment | undefined {
  const ip = networkLayer(linkType, bytes);
  if (!ip || ip.length < 20) return undefined;
  const version = ip[0]! >> 4;
  if (version === 4) {
    const head = (ip[0]! & 15) * 4;
    const total = Math.min(ip.readUInt16BE(2) || ip.length, ip.length); // 0: the network card cut it up
    if (head < 20 || total < head || (ip.readUInt16BE(6) & 0x3fff) !== 0) return undefined;
    return transportLayer(ip[9]!, ip.subarray(12, 20).toString("hex"), ip.subarray(head, total));
  }
  if (version !== 6 || ip.length < 40) return undefined;
  const total = Math.min(40 + (ip.readUInt16BE(4) || ip.length), ip.length);
  let next = ip[6]!;
  let at = 40;
  while (passedOver.has(next) && at + 8 <= total) {
    next = ip[at]!;
    at += 8 * (ip[at + 1]! + 1);
  }
  return at > total ? undefined : transportLayer(next, ip.subarray(8, 40).toString("hex"), ip.subarray(at, total));
}

function networkLayer(linkType: number, bytes: Buffer): Buffer | undefined {
  switch (linkType) {
    case 0: // loopback of BSD: address family in the host's order
    case 108:
      return bytes.subarray(4);
    case 12:
    case 14:
    case 101:
    case 228:
    case 229:
      return bytes;
    case 1:
      return afterType(bytes, 12);
    case 113: // Linux, all interfaces
      return afterType(bytes, 14);
    case 276:
      return bytes.length >= 20 ? afterType(Buffer.concat([bytes.subarray(0, 2), bytes.subarray(20)]), 0) : undefined;
    default:
      return undefined;
  }
}

function afterType(bytes: Buffer, typeAt: number): Buffer | undefined {
  let at = typeAt;
  while (at + 2 <= bytes.length && vlanTags.has(bytes.readUInt16BE(at))) at += 4;
  if (at + 2 > bytes.length) return undefined;
  const type = bytes.readUInt16BE(at);
  return type === IPV4 || type === IPV6 ? bytes.subarray(at + 2) : undefined;
}

function transportLayer(protocol: number, addresses: string, bytes: Buffer): Segment | undefined {
  if (protocol === 17 && bytes.length >= 8) {
    const flow = `udp ${addresses} ${bytes.toString("hex", 0, 4)}`;
    return { flow, transport: "udp", sequence: 0, isFirst: false, payload: bytes.subarray(8) };
  }
  if (protocol !== 6 || bytes.length < 20) return undefined;
  const head = (bytes[12]! >> 4) * 4;
  if (head < 20 || head > bytes.length) return undefined;
  const isFirst = (bytes[13]! & 2) !== 0;
  return {
    flow: `tcp ${addresses} ${bytes.toString("hex", 0, 4)}`,
    transport: "tcp",
    sequence: (bytes.readUInt32BE(4) + (isFirst ? 1 : 0)) >>> 0,
    isFirst,
    payload: bytes.subarray(head),
  };
}
