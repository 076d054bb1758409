/** Writes a fault record: the two files' bytes, or one. For the simulator, for exports, and for tests of the reader. */
import type { AnalogChannel, DataFormat, FaultRecord } from "./record.ts";

export interface WrittenRecord {
  readonly cfg: Buffer;
  readonly dat: Buffer;
}

/** Stored value = (value − 0) / factor; the factor spans the channel's range in the integer formats and is 1 for FLOAT32. */
function factorOf(channel: AnalogChannel, format: DataFormat): number {
  if (format === "FLOAT32") return 1;
  const largest = channel.values.reduce((m, v) => (Number.isFinite(v) ? Math.max(m, Math.abs(v)) : m), 0) || 1;
  return largest / (format === "BINARY32" ? 2_000_000_000 : format === "ASCII" ? 99_998 : 32_000);
}

export function writeRecord(record: FaultRecord, format: DataFormat): WrittenRecord {
  const { analogs, digitals } = record;
  const factors = analogs.map((channel) => factorOf(channel, format));
  const samples = record.timesS.length;
  const lines = [
    `${record.station},${record.device},${record.revision}`,
    `${analogs.length + digitals.length},${analogs.length}A,${digitals.length}D`,
    ...analogs.map((c, k) =>
      [
        k + 1,
        c.name,
        c.phase,
        c.circuit,
        c.unit,
        factors[k],
        0,
        c.skewUs,
        ...rangeOf(format),
        c.primary,
        c.secondary,
        c.side === "primary" ? "P" : "S",
      ].join(","),
    ),
    ...digitals.map((d, k) => `${k + 1},${d.name},,,${d.normalState}`),
    String(record.nominalHz),
    String(record.rates.length),
    ...(record.rates.length > 0 ? record.rates.map((r) => `${r.hz},${r.lastSample}`) : [`0,${samples}`]),
    stampOf(record.startUs, record.utcOffsetMinutes),
    stampOf(record.triggerUs, record.utcOffsetMinutes),
    format,
    "1",
    ...(record.revision === 2013 ? [`${offsetOf(record.utcOffsetMinutes)},${offsetOf(record.utcOffsetMinutes)}`, "0,0"] : []),
  ];
  const cfg = Buffer.from(`${lines.join("\r\n")}\r\n`, "utf8");
  return { cfg, dat: format === "ASCII" ? asciiOf(record, factors) : binaryOf(record, factors, format) };
}

/** The same in one file (2013). */
export function writeSingleFile(record: FaultRecord, format: DataFormat): Buffer {
  const { cfg, dat } = writeRecord(record, format);
  const heading = format === "ASCII" ? "--- file type: DAT ASCII ---\r\n" : `--- file type: DAT ${format}: ${dat.length} ---\r\n`;
  return Buffer.concat([Buffer.from("--- file type: CFG ---\r\n"), cfg, Buffer.from(heading), dat]);
}

const rangeOf = (format: DataFormat): readonly number[] =>
  format === "FLOAT32"
    ? [-3.4e38, 3.4e38]
    : format === "BINARY32"
      ? [-2147483647, 2147483647]
      : format === "ASCII"
        ? [-99999, 99998]
        : [-32767, 32767];

function asciiOf(record: FaultRecord, factors: readonly number[]): Buffer {
  const rows = Array.from(record.timesS, (t, n) =>
    [
      n + 1,
      Math.round(t * 1e6),
      ...record.analogs.map((c, k) =>
        Number.isNaN(c.values[n]!) ? (record.revision === 1999 ? 99999 : "") : Math.round(c.values[n]! / factors[k]!),
      ),
      ...record.digitals.map((d) => d.values[n]),
    ].join(","),
  );
  return Buffer.from(`${rows.join("\r\n")}\r\n`, "ascii");
}

function binaryOf(record: FaultRecord, factors: readonly number[], format: Exclude<DataFormat, "ASCII">): Buffer {
  const size = format === "BINARY" ? 2 : 4;
  const words = Math.ceil(record.digitals.length / 16);
  const width = 8 + record.analogs.length * size + words * 2;
  const out = Buffer.alloc(width * record.timesS.length);
  const missing = format === "BINARY" ? -0x8000 : -0x8000_0000;
  record.timesS.forEach((t, n) => {
    let at = n * width;
    out.writeUInt32LE(n + 1, at);
    out.writeUInt32LE(Math.round(t * 1e6), at + 4);
    at += 8;
    record.analogs.forEach((c, k) => {
      const value = c.values[n]!;
      if (format === "FLOAT32") out.writeFloatLE(Number.isNaN(value) ? -3.4028234663852886e38 : value, at);
      else {
        const stored = Number.isNaN(value) ? missing : Math.round(value / factors[k]!);
        if (format === "BINARY") out.writeInt16LE(stored, at);
        else out.writeInt32LE(stored, at);
      }
      at += size;
    });
    for (let w = 0; w < words; w++) {
      let word = 0;
      for (let b = 0; b < 16; b++) word |= (record.digitals[w * 16 + b]?.values[n] ?? 0) << b;
      out.writeUInt16LE(word, at + 2 * w);
    }
  });
  return out;
}

/** dd/mm/yyyy,hh:mm:ss.ssssss in the record's own zone. */
function stampOf(us: number, utcOffsetMinutes: number): string {
  const local = us + utcOffsetMinutes * 60e6;
  const [date, time] = new Date(Math.floor(local / 1000)).toISOString().split("T") as [string, string];
  const [year, month, day] = date.split("-");
  return `${day}/${month}/${year},${time.slice(0, 8)}.${String(Math.round(local % 1e6)).padStart(6, "0")}`;
}

const offsetOf = (minutes: number): string =>
  `${minutes < 0 ? "-" : ""}${Math.floor(Math.abs(minutes) / 60)}${minutes % 60 ? `h${String(Math.abs(minutes) % 60).padStart(2, "0")}` : ""}`;
