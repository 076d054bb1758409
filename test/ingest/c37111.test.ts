import { mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { afterAll, describe, expect, it } from "vitest";
import { readRecord, readRecordFile, readSingleFile } from "../../ingest/c37111/read-record.ts";
import { dataFormats, type FaultRecord, RecordError } from "../../ingest/c37111/record.ts";
import { writeRecord, writeSingleFile } from "../../ingest/c37111/write-record.ts";

const folder = mkdtempSync(join(tmpdir(), "spanmark-record-"));
afterAll(() => rmSync(folder, { recursive: true }));

const samples = 200;
const record: FaultRecord = {
  station: "Brack",
  device: "recorder 1",
  revision: 2013,
  nominalHz: 60,
  startUs: Date.UTC(2026, 2, 4, 2, 14, 6) * 1000 + 900_001,
  triggerUs: Date.UTC(2026, 2, 4, 2, 14, 7) * 1000,
  utcOffsetMinutes: -330,
  timesS: Float64Array.from({ length: samples }, (_, n) => (n < 100 ? n / 4800 : 99 / 4800 + (n - 99) / 960)),
  rates: [
    { hz: 4800, lastSample: 100 },
    { hz: 960, lastSample: 200 },
  ],
  analogs: ["VA", "IA"].map((name, k) => ({
    name,
    phase: "A",
    circuit: "Brack-Tolva",
    unit: k ? "A" : "kV",
    primary: k ? 1200 : 230,
    secondary: k ? 5 : 0.115,
    side: k ? ("secondary" as const) : ("primary" as const),
    skewUs: k * 10,
    values: Float64Array.from({ length: samples }, (_, n) => (n === 17 ? Number.NaN : 100 * Math.sin(n / 9 + k))),
  })),
  digitals: Array.from({ length: 18 }, (_, d) => ({
    name: `D${d}`,
    normalState: 0 as const,
    values: Uint8Array.from({ length: samples }, (_, n) => (n + d) & 1),
  })),
  oddities: [],
};
const read = (cfg: string | Uint8Array, dat: string | Uint8Array) =>
  readRecord(Buffer.from(cfg as string), Buffer.from(dat as string), "a.cfg", "a.dat");

describe("a record", () => {
  for (const revision of [1999, 2013] as const) {
    it.each(dataFormats)(`of ${revision} in %s reads back as it was written`, (format) => {
      const { cfg, dat } = writeRecord({ ...record, revision }, format);
      const back = readRecord(cfg, dat, "a.cfg", "a.dat", { utcOffsetMinutes: -330 });
      expect({ ...back, analogs: [], digitals: [], timesS: [], oddities: [] }).toEqual({
        ...record,
        revision,
        analogs: [],
        digitals: [],
        timesS: [],
      });
      back.timesS.forEach((t, n) => {
        expect(t).toBeCloseTo(record.timesS[n]!, 9);
      });
      back.analogs.forEach((channel, k) => {
        const wrote = record.analogs[k]!;
        expect({ ...channel, values: [] }).toEqual({ ...wrote, values: [] });
        // Half a step of the smallest format: 100/32000/2.
        channel.values.forEach((v, n) => {
          if (n === 17) expect(v).toBeNaN();
          else expect(Math.abs(v - wrote.values[n]!)).toBeLessThan(0.0016);
        });
      });
      expect(back.digitals).toEqual(record.digitals);
      expect(back.oddities).toEqual(["2 analog values marked as missing"]);
    });
  }

  it("in a single file reads like the pair, text or binary", () => {
    for (const format of dataFormats) {
      const one = readSingleFile(writeSingleFile(record, format), "a.cff");
      const { cfg, dat } = writeRecord(record, format);
      expect(one).toEqual(readRecord(cfg, dat, "a.cfg", "a.dat"));
    }
  });

  it("is found from either file of the pair, whatever the case of its ending", () => {
    const { cfg, dat } = writeRecord(record, "BINARY");
    writeFileSync(join(folder, "one.CFG"), cfg);
    writeFileSync(join(folder, "one.Dat"), dat);
    expect(readRecordFile(join(folder, "one.Dat")).station).toBe("Brack");
    expect(() => readRecordFile(join(folder, "two.cfg"))).toThrow(/two\.cfg beside two\.cfg/);
  });
});

// Written by hand from the standard's description, so that reader and writer cannot agree on a mistake.
const HAND_CFG = [
  "Qu\u00e9nby,17,1999",
  "3,2A,1D",
  "1,VA,A,,kV,0.01,0.5,0,-32767,32767,500,0.115,P",
  "2,IA,A,,A,0.1,0,0,-32767,32767,2000,1,S",
  "1,TRIP,,,0",
  "50",
  "1",
  "1000,3",
  "04/03/2026,02:14:07.000000",
  "04/03/2026,02:14:07.001000",
  "ASCII",
  "1",
];
const HAND_DAT = "1,0,100,-20,0\r\n2,1000,200,99999,1\r\n3,2000,-300,40,1\r\n";

describe("a record written by hand", () => {
  it("gives the values that the standard's formula gives", () => {
    const r = read(HAND_CFG.join("\r\n"), HAND_DAT);
    expect([...r.analogs[0]!.values]).toEqual([1.5, 2.5, -2.5]);
    expect(r.analogs[1]!.values[0]).toBeCloseTo(-2, 12);
    expect(r.analogs[1]!.values[1]).toBeNaN();
    expect([...r.digitals[0]!.values]).toEqual([0, 1, 1]);
    expect([...r.timesS]).toEqual([0, 0.001, 0.002]);
    expect(r.startUs).toBe(Date.UTC(2026, 2, 4, 2, 14, 7) * 1000);
    expect(r.triggerUs - r.startUs).toBe(1000);
  });

  it("binary: sample number, stamp, two analogs, one word of digitals, little-endian", () => {
    const bytes = Buffer.from(
      "01000000" +
        "00000000" +
        "6400" +
        "ecff" +
        "0000" +
        "02000000" +
        "e8030000" +
        "c800" +
        "0080" +
        "0100" +
        "03000000" +
        "d0070000" +
        "d4fe" +
        "2800" +
        "0100",
      "hex",
    );
    const r = read(HAND_CFG.map((l) => (l === "ASCII" ? "BINARY" : l)).join("\n"), bytes);
    expect([...r.analogs[0]!.values]).toEqual([1.5, 2.5, -2.5]);
    expect(r.analogs[1]!.values[1]).toBeNaN();
    expect([...r.digitals[0]!.values]).toEqual([0, 1, 1]);
  });

  it("reads Latin-1 names and old line ends, and takes stamps when no rate is stated", () => {
    const latin = Buffer.from(
      HAND_CFG.map((l) => (l === "1" ? "1" : l))
        .join("\r")
        .replace("\r1\r1000,3\r", "\r0\r0,3\r"),
      "latin1",
    );
    const r = readRecord(latin, Buffer.from(HAND_DAT), "a.cfg", "a.dat");
    expect(r.station).toBe("Qu\u00e9nby");
    expect(r.rates).toEqual([]);
    expect([...r.timesS]).toEqual([0, 0.001, 0.002]);
  });

  it("says which samples are missing, and keeps the time of those that are there", () => {
    const r = read(HAND_CFG.join("\n"), HAND_DAT.replace("3,2000", "5,4000"));
    expect(r.oddities[0]).toBe("2 samples missing after number 2");
    expect(r.timesS[2]).toBeCloseTo(0.004, 12);
  });
});

describe("a record that is wrong is refused with what, where and what to do", () => {
  const without = (from: string, to: string) => HAND_CFG.map((l) => (l === from ? to : l)).join("\n");
  it.each([
    ["unknown-revision", "a.cfg:1", without("Qu\u00e9nby,17,1999", "Quenby,17"), HAND_DAT],
    ["channel-count", "a.cfg:2", without("3,2A,1D", "4,2A,1D"), HAND_DAT],
    ["channel-count", "a.cfg:2", without("3,2A,1D", "3,2,1"), HAND_DAT],
    ["bad-field", "a.cfg:3", without(HAND_CFG[2]!, "1,VA,A,,kV,x,0.5,0,-1,1,500,0.1,P"), HAND_DAT],
    ["bad-field", "a.cfg:9", without("04/03/2026,02:14:07.000000", "04/13/2026,02:14:07.000000"), HAND_DAT],
    ["unknown-format", "a.cfg:11", without("ASCII", "PACKED"), HAND_DAT],
    ["too-few-lines", "a.cfg", HAND_CFG.slice(0, 8).join("\n"), HAND_DAT],
    ["truncated", "a.dat", HAND_CFG.join("\n"), HAND_DAT.slice(0, 30)],
    ["sample-count", "a.dat", HAND_CFG.join("\n"), `${HAND_DAT}4,3000,1,1,0\r\n`],
    ["bad-field", "a.dat:2", HAND_CFG.join("\n"), HAND_DAT.replace("200,", "2oo,")],
    ["bad-field", "a.dat:1", HAND_CFG.join("\n"), HAND_DAT.replace("1,0,100,-20,0", "1,0,100,-20")],
    ["time-order", "a.dat, sample 3", HAND_CFG.join("\n"), HAND_DAT.replace("3,2000", "2,2000")],
    ["truncated", "a.dat", without("ASCII", "FLOAT32"), "abc"],
  ] as const)("%s at %s", (code, where, cfg, dat) => {
    try {
      read(cfg, dat);
      expect.unreachable();
    } catch (error) {
      expect(error).toBeInstanceOf(RecordError);
      expect((error as RecordError).code).toBe(code);
      expect((error as RecordError).where).toContain(where);
      expect((error as RecordError).message).toMatch(/expected .+, found .+/);
    }
  });

  it("month first is said to look like it", () => {
    expect(() => read(without("04/03/2026,02:14:07.000000", "04/13/2026,02:14:07.000000"), HAND_DAT)).toThrow(/month first/);
  });

  it("a file of another kind, and one without its sections", () => {
    expect(() => readRecordFile("/x/photo.jpg")).toThrow(/a \.cfg, \.dat or \.cff file/);
    expect(() => readSingleFile(Buffer.from("hello"), "a.cff")).toThrow(/section "--- file type: CFG ---"/);
  });
});
