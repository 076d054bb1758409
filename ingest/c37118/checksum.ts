/**
 * CRC-CCITT of synchrophasor frames: polynomial x¹⁶ + x¹² + x⁵ + 1, start 0xFFFF, no reflection, no final inversion.
 * Source: IEEE C37.118.2-2011, clause 6.2 and annex B (from memory); check value in the CRC catalogue: "123456789" gives 0x29B1.
 */
const POLYNOMIAL = 0x1021;

/** What eight zero bits do to a byte in the register's high half. */
const byByte = Uint16Array.from({ length: 256 }, (_, byte) => {
  let crc = byte << 8;
  for (let bit = 0; bit < 8; bit++) crc = crc & 0x8000 ? ((crc << 1) ^ POLYNOMIAL) & 0xffff : (crc << 1) & 0xffff;
  return crc;
});

/** The same for two bytes at once: half as many dependent look-ups, which is what a frame's check costs. */
const byWord = Uint16Array.from({ length: 65_536 }, (_, word) => {
  const high = byByte[word >> 8]!;
  return ((high << 8) & 0xffff) ^ byByte[(high >> 8) ^ (word & 0xff)]!;
});

/** Over `bytes[from..to)`. */
export function crcCcitt(bytes: Uint8Array, from: number, to: number): number {
  let crc = 0xffff;
  let at = from;
  for (; at + 1 < to; at += 2) crc = byWord[crc ^ ((bytes[at]! << 8) | bytes[at + 1]!)]!;
  if (at < to) crc = ((crc << 8) & 0xffff) ^ byByte[(crc >> 8) ^ bytes[at]!]!;
  return crc;
}
