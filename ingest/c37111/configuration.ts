/**
 * The configuration part of a fault record. Source: IEEE C37.111-1999 and IEEE C37.111-2013 (IEC 60255-24:2013), clause 7; from memory.
 */
import { type DataFormat, dataFormats, RecordError } from "./record.ts";

export interface AnalogHeader {
  readonly name: string;
  readonly phase: string;
  readonly circuit: string;
  readonly unit: string;
  /** value = factor × stored + offset, in `unit` */
  readonly factor: number;
  readonly offset: number;
  readonly skewUs: number;
  readonly primary: number;
  readonly secondary: number;
  readonly side: "primary" | "secondary";
}

export interface RecordHeader {
  readonly station: string;
  readonly device: string;
  readonly revision: 1999 | 2013;
  readonly analogs: readonly AnalogHeader[];
  readonly digitals: readonly { readonly name: string; readonly normalState: 0 | 1 }[];
  readonly nominalHz: number;
  readonly rates: readonly { readonly hz: number; readonly lastSample: number }[];
  readonly samples: number;
  readonly startUs: number;
  readonly triggerUs: number;
  readonly utcOffsetMinutes: number;
  readonly format: DataFormat;
  /** Seconds per unit of a sample's time stamp. */
  readonly stampS: number;
}

/** Bounds before memory is taken; the standard allows 999,999 channels, no recorder comes near. */
const MOST_CHANNELS = 20_000;
const MOST_SAMPLES = 100_000_000;

/** Old DOS programs end a text with this character. */
export const END_OF_FILE_MARK = "\x1a";

/** UTF-8 where it is valid, else Latin-1 (older recorders write station names so); byte-order mark dropped. */
export function textOf(bytes: Uint8Array): string {
  try {
    return new TextDecoder("utf-8", { fatal: true }).decode(bytes);
  } catch {
    return new TextDecoder("latin1").decode(bytes);
  }
}

/** Hands out lines and their fields, and knows where it is. */
class Lines {
  readonly #lines: string[];
  readonly #file: string;
  #next = 0;
  constructor(text: string, file: string) {
    this.#lines = text.split(/\r\n|\n|\r/);
    this.#file = file;
  }
  get where(): string {
    return `${this.#file}:${this.#next}`;
  }
  /** @param least fields that must be there */
  fields(what: string, least: number): string[] {
    const line = this.#lines[this.#next++];
    if (line === undefined || (line.trim() === "" && least > 0)) {
      throw new RecordError("too-few-lines", {
        expected: what,
        found: line === undefined ? "the end of the file" : "an empty line",
        where: this.where,
      });
    }
    const fields = line
      .replaceAll(END_OF_FILE_MARK, "")
      .split(",")
      .map((f) => f.trim());
    if (fields.length < least) {
      throw new RecordError("bad-field", {
        expected: `${what}: at least ${least} fields separated by commas`,
        found: `"${line}"`,
        where: this.where,
      });
    }
    return fields;
  }
  optional(): string[] | undefined {
    const line = this.#lines[this.#next];
    if (line === undefined || line.trim() === "") return undefined;
    return this.fields("", 0);
  }
  number(text: string | undefined, what: string, fallback?: number): number {
    const empty = text === undefined || text === "";
    if (empty && fallback !== undefined) return fallback;
    const value = Number(text);
    if (empty || !Number.isFinite(value))
      throw new RecordError("bad-field", { expected: `${what}: a number`, found: `"${text ?? ""}"`, where: this.where });
    return value;
  }
  whole(text: string | undefined, what: string, most: number): number {
    const value = this.number(text, what);
    if (!Number.isInteger(value) || value < 0 || value > most) {
      throw new RecordError("bad-field", {
        expected: `${what}: a whole number from 0 to ${most}`,
        found: `"${text}"`,
        where: this.where,
      });
    }
    return value;
  }
}

/** @param utcOffsetMinutes  zone of a 1999 record's times, which the file does not state: minutes that local time is ahead of UTC */
export function readConfiguration(text: string, file: string, utcOffsetMinutes = 0): RecordHeader {
  const lines = new Lines(text, file);
  const [station, device, year] = lines.fields("station, device, revision year", 2);
  if (year !== "1999" && year !== "2013") {
    throw new RecordError("unknown-revision", {
      expected: "revision year 1999 or 2013 as third field",
      found: year === undefined || year === "" ? "none (a 1991 record, or not a configuration file)" : `"${year}"`,
      where: lines.where,
      whatToDo: "Export the record again in revision 1999 or 2013.",
    });
  }
  const revision = year === "1999" ? 1999 : 2013;
  const counts = lines.fields("total, analog and digital channel counts", 3);
  const total = lines.whole(counts[0], "total channels", MOST_CHANNELS);
  const count = (text: string | undefined, letter: string, what: string) => {
    if (!text?.toUpperCase().endsWith(letter))
      throw new RecordError("channel-count", { expected: `${what} like "6${letter}"`, found: `"${text}"`, where: lines.where });
    return lines.whole(text.slice(0, -1), what, MOST_CHANNELS);
  };
  const analogCount = count(counts[1], "A", "analog channels");
  const digitalCount = count(counts[2], "D", "digital channels");
  if (analogCount + digitalCount !== total) {
    throw new RecordError("channel-count", {
      expected: `${analogCount} + ${digitalCount} channels in total`,
      found: String(total),
      where: lines.where,
    });
  }
  const analogs = Array.from({ length: analogCount }, (_, k): AnalogHeader => {
    const f = lines.fields(`analog channel ${k + 1}`, 10);
    const at = `analog channel ${k + 1} "${f[1]}"`;
    return {
      name: f[1]!,
      phase: f[2]!,
      circuit: f[3]!,
      unit: f[4]!,
      factor: lines.number(f[5], `${at}, multiplier a`),
      offset: lines.number(f[6], `${at}, offset b`, 0),
      skewUs: lines.number(f[7], `${at}, skew`, 0),
      primary: lines.number(f[10], `${at}, primary ratio`, 1),
      secondary: lines.number(f[11], `${at}, secondary ratio`, 1),
      side: f[12]?.toUpperCase() === "S" ? "secondary" : "primary",
    };
  });
  const digitals = Array.from({ length: digitalCount }, (_, k) => {
    const f = lines.fields(`digital channel ${k + 1}`, 2);
    return { name: f[1]!, normalState: f.at(-1) === "1" ? (1 as const) : (0 as const) };
  });
  const nominalHz = lines.number(lines.fields("line frequency", 1)[0], "line frequency", 60);
  const rateCount = lines.whole(lines.fields("number of sampling rates", 1)[0], "number of sampling rates", 1000);
  const rates = Array.from({ length: Math.max(1, rateCount) }, (_, k) => {
    const f = lines.fields(`sampling rate ${k + 1} and its last sample`, 2);
    return { hz: lines.number(f[0], "sampling rate"), lastSample: lines.whole(f[1], "last sample", MOST_SAMPLES) };
  });
  for (let k = 1; k < rates.length; k++) {
    if (rates[k]!.lastSample <= rates[k - 1]!.lastSample) {
      throw new RecordError("sample-count", {
        expected: `rate ${k + 1} to end after sample ${rates[k - 1]!.lastSample}`,
        found: String(rates[k]!.lastSample),
        where: lines.where,
      });
    }
  }
  const start = readTime(lines.fields("time of the first sample", 2), lines.where);
  const trigger = readTime(lines.fields("time of the trigger", 2), lines.where);
  const formatText = lines.fields("data format", 1)[0]!.toUpperCase();
  const format = dataFormats.find((f) => f === formatText);
  if (!format)
    throw new RecordError("unknown-format", { expected: dataFormats.join(", "), found: `"${formatText}"`, where: lines.where });
  const multiplier = lines.number(lines.optional()?.[0], "time multiplier", 1);
  const zone = revision === 2013 ? lines.optional() : undefined;
  const offset = zone ? readOffset(zone[0]!, lines.where) : utcOffsetMinutes;
  const toUtc = (us: number) => us - offset * 60e6;
  return {
    station: station!,
    device: device ?? "",
    revision,
    analogs,
    digitals,
    nominalHz,
    rates: rateCount === 0 || rates.some((r) => r.hz === 0) ? [] : rates,
    samples: rates.at(-1)!.lastSample,
    startUs: toUtc(start.us),
    triggerUs: toUtc(trigger.us),
    utcOffsetMinutes: offset,
    format,
    // Stamps count nanoseconds when the times are written with more than six decimals (2013), else microseconds.
    stampS: (start.decimals > 6 ? 1e-9 : 1e-6) * (multiplier === 0 ? 1 : multiplier),
  };
}

/** dd/mm/yyyy,hh:mm:ss.ssssss as µs since 1970, no zone applied. */
function readTime([date, time]: readonly string[], where: string): { us: number; decimals: number } {
  const d = /^(\d{1,2})\/(\d{1,2})\/(\d{4})$/.exec(date!);
  const t = /^(\d{1,2}):(\d{1,2}):(\d{1,2})(?:\.(\d{1,9}))?$/.exec(time!);
  const [day, month, year, hour, minute, second] = [d?.[1], d?.[2], d?.[3], t?.[1], t?.[2], t?.[3]].map(Number) as [
    number,
    number,
    number,
    number,
    number,
    number,
  ];
  if (!d || !t || month < 1 || month > 12 || day < 1 || day > 31 || hour > 23 || minute > 59 || second > 60) {
    const isMonthFirst = d && month > 12 && day <= 12;
    throw new RecordError("bad-field", {
      expected: "dd/mm/yyyy,hh:mm:ss.ssssss",
      found: `"${date},${time}"`,
      where,
      ...(isMonthFirst ? { whatToDo: "The date looks like month first: revision 1999 and later write the day first." } : {}),
    });
  }
  const fraction = t[4] ?? "";
  return {
    us: Date.UTC(year, month - 1, day, hour, minute, second) * 1000 + Math.round(Number(`0.${fraction || "0"}`) * 1e6),
    decimals: fraction.length,
  };
}

/** "-5h30", "0", "5" hours ahead of UTC; "x" is unknown and read as 0. In minutes. */
function readOffset(text: string, where: string): number {
  if (text.toLowerCase() === "x" || text === "") return 0;
  const m = /^([+-]?)(\d{1,2})(?:h(\d{1,2}))?$/i.exec(text);
  if (!m) throw new RecordError("bad-field", { expected: 'a UTC offset such as "-4" or "5h30"', found: `"${text}"`, where });
  return (m[1] === "-" ? -1 : 1) * (Number(m[2]) * 60 + Number(m[3] ?? 0));
}
