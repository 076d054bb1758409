/** CRC-CCITT with start 0xFFFF. Source: the CRC catalogue (reveng.sourceforge.io), CRC-16/IBM-3740: check value of "123456789" is 0x29B1. */
import { expect, it } from "vitest";
import { crcCcitt } from "../../ingest/index.ts";

it("gives the catalogue's check value", () => {
  expect(crcCcitt(Buffer.from("123456789"), 0, 9)).toBe(0x29b1);
});
it("agrees with the plain bit-by-bit definition on any length", () => {
  const bytes = Buffer.from(Array.from({ length: 101 }, (_, k) => (k * 73 + 19) & 255));
  for (let n = 0; n <= bytes.length; n++) {
    let crc = 0xffff;
    for (const byte of bytes.subarray(0, n))
      for (let bit = 7; bit >= 0; bit--) crc = ((crc << 1) ^ (((crc >> 15) ^ (byte >> bit)) & 1 ? 0x1021 : 0)) & 0xffff;
    expect(crcCcitt(bytes, 0, n)).toBe(crc);
  }
});
