/** Reads a fault record from disk: a .cfg with its .dat beside it, or a single .cff. */
import { existsSync, readdirSync, readFileSync, statSync } from "node:fs";
import { basename, dirname, extname, join } from "node:path";
import { readConfiguration, textOf } from "./configuration.ts";
import { type FaultRecord, RecordError } from "./record.ts";
import { readSamples } from "./samples.ts";

/** A minute of 40 channels at 10 kHz in ASCII is some 200 MB; larger files are some mistake, and would take the monitor's memory. */
const MOST_BYTES = 512 * 1024 * 1024;

export interface ReadOptions {
  /** Zone of a 1999 record's times: minutes that local time is ahead of UTC. */
  readonly utcOffsetMinutes?: number;
}

/**
 * @param path  the .cfg, .dat or .cff file; the case of endings does not matter
 * @throws RecordError  with a listed code, what was expected, what was found and where
 */
export function readRecordFile(path: string, options: ReadOptions = {}): FaultRecord {
  const ending = extname(path).toLowerCase();
  if (ending === ".cff") return readSingleFile(bytesOf(path), path, options);
  if (ending !== ".cfg" && ending !== ".dat") {
    throw new RecordError("not-a-record", { expected: "a .cfg, .dat or .cff file", found: basename(path), where: path });
  }
  const cfg = siblingOf(path, ".cfg");
  const dat = siblingOf(path, ".dat");
  return readRecord(bytesOf(cfg), bytesOf(dat), cfg, dat, options);
}

export function readRecord(
  cfg: Uint8Array,
  dat: Uint8Array,
  cfgName: string,
  datName: string,
  options: ReadOptions = {},
): FaultRecord {
  return readSamples(readConfiguration(textOf(cfg), cfgName, options.utcOffsetMinutes), dat, datName);
}

/** Sections begin with "--- file type: CFG ---", "--- file type: DAT ASCII ---", "--- file type: DAT BINARY: 12345 ---" (bytes). 2013, clause 5.6 (from memory). */
export function readSingleFile(bytes: Uint8Array, file: string, options: ReadOptions = {}): FaultRecord {
  const latin = new TextDecoder("latin1").decode(bytes);
  const headings = [...latin.matchAll(/^--- *file type: *([A-Z]+)(?: +([A-Z0-9]+))?(?: *: *(\d+))? *---[ \t]*\r?\n/gim)];
  const section = (name: string) => {
    const k = headings.findIndex((h) => h[1]!.toUpperCase() === name);
    const heading = headings[k];
    if (!heading) {
      const found = headings.length === 0 ? "none" : headings.map((h) => h[1]).join(", ");
      throw new RecordError("not-a-record", { expected: `a section "--- file type: ${name} ---"`, found, where: file });
    }
    const from = heading.index + heading[0].length;
    const stated = heading[3] === undefined ? undefined : Number(heading[3]);
    const to = stated === undefined ? (headings[k + 1]?.index ?? bytes.length) : from + stated;
    if (to > bytes.length)
      throw new RecordError("truncated", {
        expected: `${stated} bytes of ${name}`,
        found: `${bytes.length - from}`,
        where: file,
      });
    return bytes.subarray(from, to);
  };
  return readRecord(section("CFG"), section("DAT"), `${file} (CFG)`, `${file} (DAT)`, options);
}

function siblingOf(path: string, ending: string): string {
  const stem = basename(path, extname(path));
  const folder = dirname(path);
  const name = existsSync(folder)
    ? readdirSync(folder).find((f) => f.slice(0, stem.length) === stem && f.slice(stem.length).toLowerCase() === ending)
    : undefined;
  if (!name)
    throw new RecordError("no-such-file", {
      expected: `${stem}${ending} beside ${basename(path)}`,
      found: "no such file",
      where: folder,
    });
  return join(folder, name);
}

function bytesOf(path: string): Uint8Array {
  let size: number;
  try {
    size = statSync(path).size;
  } catch (cause) {
    throw new RecordError("no-such-file", { expected: "a readable file", found: "none", where: path, cause });
  }
  if (size > MOST_BYTES) {
    throw new RecordError("too-large", {
      expected: `at most ${MOST_BYTES / 1048576} MiB`,
      found: `${Math.round(size / 1048576)} MiB`,
      where: path,
      whatToDo: "Cut the record to the seconds around the fault.",
    });
  }
  return readFileSync(path);
}
