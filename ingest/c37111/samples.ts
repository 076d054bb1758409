/** The data part of a fault record. Source: IEEE C37.111-1999 and -2013, clause 8; from memory. Little-endian. */
import { END_OF_FILE_MARK, type RecordHeader, textOf } from "./configuration.ts";
import { type DataFormat, type FaultRecord, RecordError } from "./record.ts";

/** Value that marks a missing sample; ASCII: 99999 (1999) or nothing (2013). */
const MISSING_ASCII = 99_999;
const MISSING_16 = -0x8000;
const MISSING_32 = -0x8000_0000;
const MISSING_FLOAT = Math.fround(-3.4028234663852886e38);
const MISSING_STAMP = 0xffff_ffff;

const ANALOG_BYTES: Readonly<Record<Exclude<DataFormat, "ASCII">, 2 | 4>> = { BINARY: 2, BINARY32: 4, FLOAT32: 4 };

interface Raw {
  /** [samples] sample numbers as written */
  readonly numbers: Float64Array;
  /** [samples] stamps as written; NaN when missing */
  readonly stamps: Float64Array;
  /** [analogs][samples] stored values; NaN when missing */
  readonly analogs: readonly Float64Array[];
  readonly digitals: readonly Uint8Array[];
}

export function readSamples(header: RecordHeader, bytes: Uint8Array, file: string): FaultRecord {
  const raw = header.format === "ASCII" ? readAscii(header, textOf(bytes), file) : readBinary(header, header.format, bytes, file);
  const oddities: string[] = [];
  for (let n = 1; n < header.samples; n++) {
    const step = raw.numbers[n]! - raw.numbers[n - 1]!;
    if (step <= 0) {
      throw new RecordError("time-order", {
        expected: `sample number above ${raw.numbers[n - 1]}`,
        found: String(raw.numbers[n]),
        where: `${file}, sample ${n + 1}`,
      });
    }
    if (step > 1) oddities.push(`${step - 1} samples missing after number ${raw.numbers[n - 1]}`);
  }
  const missing = raw.analogs.reduce((s, values) => s + values.reduce((k, v) => k + (Number.isNaN(v) ? 1 : 0), 0), 0);
  if (missing > 0) oddities.push(`${missing} analog values marked as missing`);
  return {
    station: header.station,
    device: header.device,
    revision: header.revision,
    nominalHz: header.nominalHz,
    startUs: header.startUs,
    triggerUs: header.triggerUs,
    utcOffsetMinutes: header.utcOffsetMinutes,
    rates: header.rates,
    timesS: timesOf(header, raw, file),
    analogs: header.analogs.map(({ factor, offset, ...channel }, k) => ({
      ...channel,
      values: raw.analogs[k]!.map((v) => factor * v + offset),
    })),
    digitals: header.digitals.map((channel, k) => ({ ...channel, values: raw.digitals[k]! })),
    oddities,
  };
}

/** From the sampling rates by sample number where the file gives them, else from the stamps. */
function timesOf(header: RecordHeader, raw: Raw, file: string): Float64Array {
  const { samples, rates } = header;
  const times = new Float64Array(samples);
  if (rates.length > 0) {
    let rate = 0;
    let at = 0;
    for (let n = 0; n < samples; n++) {
      while (n + 1 > rates[rate]!.lastSample) rate++;
      if (n > 0) at += (raw.numbers[n]! - raw.numbers[n - 1]!) / rates[rate]!.hz;
      times[n] = at;
    }
    return times;
  }
  for (let n = 0; n < samples; n++) {
    times[n] = (raw.stamps[n]! - raw.stamps[0]!) * header.stampS;
    if (!(n === 0 || times[n]! > times[n - 1]!)) {
      throw new RecordError("time-order", {
        expected: "a time stamp later than the one before",
        found: String(raw.stamps[n]),
        where: `${file}, sample ${n + 1}`,
      });
    }
  }
  return times;
}

function emptyRaw(header: RecordHeader): Raw {
  const { samples } = header;
  return {
    numbers: new Float64Array(samples),
    stamps: new Float64Array(samples),
    analogs: header.analogs.map(() => new Float64Array(samples)),
    digitals: header.digitals.map(() => new Uint8Array(samples)),
  };
}

function readAscii(header: RecordHeader, text: string, file: string): Raw {
  const rows = text.split(/\r\n|\n|\r/).filter((row) => row.replaceAll(END_OF_FILE_MARK, "").trim() !== "");
  if (rows.length !== header.samples) {
    throw new RecordError(rows.length < header.samples ? "truncated" : "sample-count", {
      expected: `${header.samples} samples, as the configuration says`,
      found: `${rows.length} lines`,
      where: file,
      whatToDo: "Copy the record again from its source.",
    });
  }
  const raw = emptyRaw(header);
  const width = 2 + header.analogs.length + header.digitals.length;
  rows.forEach((row, n) => {
    const fields = row.split(",");
    const where = `${file}:${n + 1}`;
    if (fields.length !== width)
      throw new RecordError("bad-field", { expected: `${width} fields`, found: `${fields.length}`, where });
    const number = (k: number, missing: number) => {
      const field = fields[k]!.trim();
      if (field === "") return Number.NaN;
      const value = Number(field);
      if (Number.isNaN(value))
        throw new RecordError("bad-field", { expected: `field ${k + 1} to be a number`, found: `"${field}"`, where });
      return value === missing ? Number.NaN : value;
    };
    raw.numbers[n] = number(0, Number.NaN);
    raw.stamps[n] = number(1, Number.NaN);
    for (let c = 0; c < raw.analogs.length; c++) raw.analogs[c]![n] = number(2 + c, MISSING_ASCII);
    for (let c = 0; c < raw.digitals.length; c++)
      raw.digitals[c]![n] = number(2 + raw.analogs.length + c, Number.NaN) === 1 ? 1 : 0;
  });
  return raw;
}

function readBinary(header: RecordHeader, format: Exclude<DataFormat, "ASCII">, bytes: Uint8Array, file: string): Raw {
  const size = ANALOG_BYTES[format];
  const words = Math.ceil(header.digitals.length / 16);
  const width = 8 + header.analogs.length * size + words * 2;
  if (bytes.length !== width * header.samples) {
    throw new RecordError(bytes.length < width * header.samples ? "truncated" : "sample-count", {
      expected: `${header.samples} samples of ${width} bytes (${format}), ${width * header.samples} bytes`,
      found: `${bytes.length} bytes`,
      where: file,
      whatToDo: "Copy the record again from its source, or check the data format in the configuration.",
    });
  }
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  const raw = emptyRaw(header);
  const read = {
    BINARY: (at: number) => orMissing(view.getInt16(at, true), MISSING_16),
    BINARY32: (at: number) => orMissing(view.getInt32(at, true), MISSING_32),
    FLOAT32: (at: number) => orMissing(view.getFloat32(at, true), MISSING_FLOAT),
  }[format];
  for (let n = 0; n < header.samples; n++) {
    let at = n * width;
    raw.numbers[n] = view.getUint32(at, true);
    const stamp = view.getUint32(at + 4, true);
    raw.stamps[n] = stamp === MISSING_STAMP ? Number.NaN : stamp;
    at += 8;
    for (const values of raw.analogs) {
      values[n] = read(at);
      at += size;
    }
    raw.digitals.forEach((values, d) => {
      values[n] = (view.getUint16(at + 2 * (d >> 4), true) >> (d & 15)) & 1;
    });
  }
  return raw;
}

const orMissing = (value: number, missing: number): number => (value === missing ? Number.NaN : value);
