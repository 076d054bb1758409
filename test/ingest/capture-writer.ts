/** Captures written by hand for tests: link, IP and transport layers around payloads, in either file format. */

export type Link = "ethernet" | "ethernet-vlan" | "raw" | "loopback";
export interface Sent {
  readonly protocol: "tcp" | "udp";
  readonly from: number;
  readonly to: number;
  /** TCP only. */
  readonly sequence?: number;
  readonly isFirst?: boolean;
  readonly payload: Buffer;
}

const linkTypes = { ethernet: 1, "ethernet-vlan": 1, raw: 101, loopback: 0 } as const;

function packet(sent: Sent, link: Link, version: 4 | 6): Buffer {
  const head = Buffer.alloc(sent.protocol === "tcp" ? 20 : 8);
  head.writeUInt16BE(sent.from, 0);
  head.writeUInt16BE(sent.to, 2);
  if (sent.protocol === "tcp") {
    head.writeUInt32BE((sent.sequence ?? 0) >>> 0, 4);
    head[12] = 0x50;
    head[13] = sent.isFirst ? 0x02 : 0x18;
    head.writeUInt16BE(65_535, 14);
  } else head.writeUInt16BE(8 + sent.payload.length, 4);
  const inner = Buffer.concat([head, sent.payload]);
  const ip = Buffer.alloc(version === 4 ? 20 : 40);
  if (version === 4) {
    ip[0] = 0x45;
    ip.writeUInt16BE(20 + inner.length, 2);
    ip[8] = 64;
    ip[9] = sent.protocol === "tcp" ? 6 : 17;
    ip.writeUInt32BE(0x0a000001, 12);
    ip.writeUInt32BE(0x0a000002, 16);
  } else {
    ip[0] = 0x60;
    ip.writeUInt16BE(inner.length, 4);
    ip[6] = sent.protocol === "tcp" ? 6 : 17;
    ip[7] = 64;
    ip[8] = 0xfd;
    ip[23] = 1;
    ip[24] = 0xfd;
    ip[39] = 2;
  }
  const type = version === 4 ? "0800" : "86dd";
  const before = {
    ethernet: Buffer.from(`020000000001020000000002${type}`, "hex"),
    "ethernet-vlan": Buffer.from(`0200000000010200000000028100000a${type}`, "hex"),
    raw: Buffer.alloc(0),
    loopback: Buffer.from(version === 4 ? "02000000" : "1e000000", "hex"),
  }[link];
  // Short Ethernet frames are padded: what stands behind the IP length is no payload.
  const bytes = Buffer.concat([before, ip, inner]);
  return link.startsWith("ethernet") && bytes.length < 60 ? Buffer.concat([bytes, Buffer.alloc(60 - bytes.length, 0xaa)]) : bytes;
}

export function classicCapture(all: readonly Sent[], link: Link = "ethernet", version: 4 | 6 = 4, isLittle = true): Buffer {
  const word = (value: number) => {
    const b = Buffer.alloc(4);
    isLittle ? b.writeUInt32LE(value) : b.writeUInt32BE(value);
    return b;
  };
  const half = (value: number) => word(value).subarray(isLittle ? 0 : 2, isLittle ? 2 : 4);
  const head = [word(0xa1b2c3d4), half(2), half(4), word(0), word(0), word(262_144), word(linkTypes[link])];
  const records = all.flatMap((sent, k) => {
    const bytes = packet(sent, link, version);
    return [word(1_772_590_440 + k), word(0), word(bytes.length), word(bytes.length), bytes];
  });
  return Buffer.concat([...head, ...records]);
}

/** Packets in turn as enhanced and simple blocks, with an unknown block and options between. */
export function nextGenerationCapture(all: readonly Sent[], link: Link = "ethernet", version: 4 | 6 = 4): Buffer {
  const block = (type: number, body: Buffer) => {
    const padded = Buffer.concat([body, Buffer.alloc((4 - (body.length % 4)) % 4)]);
    const ends = words([type, 12 + padded.length]);
    return Buffer.concat([ends, padded, ends.subarray(4)]);
  };
  const section = block(0x0a0d0d0a, Buffer.concat([words([0x1a2b3c4d, 1]), Buffer.alloc(8, 0xff)]));
  const linkBlock = block(1, words([linkTypes[link], 0]));
  const packets = all.map((sent, k) => {
    const bytes = packet(sent, link, version);
    return k % 2 === 0
      ? block(6, Buffer.concat([words([0, 0, k, bytes.length, bytes.length]), bytes]))
      : block(3, Buffer.concat([words([bytes.length]), bytes]));
  });
  return Buffer.concat([section, linkBlock, block(5, Buffer.alloc(12)), ...packets]);
}

function words(values: readonly number[]): Buffer {
  const bytes = Buffer.alloc(4 * values.length);
  values.forEach((value, k) => {
    bytes.writeUInt32LE(value, 4 * k);
  });
  return bytes;
}
