import { execFileSync } from "node:child_process";
import { mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import fc from "fast-check";
import pino from "pino";
import { afterAll, describe, expect, it } from "vitest";
import { encodeConfig, RecordingError, replayRecordings } from "../../ingest/index.ts";
import { plainNetwork } from "../pipeline/network.ts";
import { classicCapture, type Link, nextGenerationCapture, type Sent } from "./capture-writer.ts";
import { frameOf, streamOf } from "./unit-peer.ts";

const folder = mkdtempSync(join(tmpdir(), "spanmark-pcap-"));
afterAll(() => rmSync(folder, { recursive: true }));
const silent = pino({ level: "silent" });
const network = plainNetwork([
  { pmuClass: "M", reportingRateHz: 60 },
  { pmuClass: "M", reportingRateHz: 30 },
]);
const brack = streamOf(1);
const tolva = streamOf(2, undefined, 30);
const COUNT = 20;
const stream = (config: typeof brack) => [
  encodeConfig(config, "configuration-2", 0),
  ...Array.from({ length: COUNT }, (_, k) => frameOf(config, k)),
];

const udp = (frames: readonly Buffer[], from = 4713): Sent[] =>
  frames.map((payload) => ({ protocol: "udp", from, to: 4713, payload }));
/** Cut into segments of `size` bytes; the numbers wrap within the stream. */
function tcp(frames: readonly Buffer[], size: number, from = 4712): Sent[] {
  const start = 0xffff_ff00;
  const bytes = Buffer.concat(frames);
  const pieces = Array.from({ length: Math.ceil(bytes.length / size) }, (_, k) => k * size);
  return [
    { protocol: "tcp", from, to: 50_000, sequence: start - 1, isFirst: true, payload: Buffer.alloc(0) },
    ...pieces.map(
      (at): Sent => ({ protocol: "tcp", from, to: 50_000, sequence: start + at, payload: bytes.subarray(at, at + size) }),
    ),
  ];
}
let count = 0;
function slots(capture: Buffer, feedId = "at-brack"): number[] {
  const path = join(folder, `${count++}`);
  writeFileSync(path, capture);
  const rate = feedId === "at-brack" ? 60 : 30;
  return [...replayRecordings(network, new Map([[feedId, path]]), silent)].map((b) => b.lastSlot - 1_772_590_440 * rate);
}
const all = Array.from({ length: COUNT }, (_, k) => k);

describe("captures in place of recordings", () => {
  for (const link of ["ethernet", "ethernet-vlan", "raw", "loopback"] satisfies Link[]) {
    for (const version of [4, 6] as const) {
      it(`${link}, IP version ${version}: UDP and TCP, each file format, each stream for itself`, () => {
        const both = [...udp(stream(brack)), ...tcp(stream(tolva), 100)];
        for (const capture of [
          classicCapture(both, link, version, true),
          classicCapture(both, link, version, false),
          nextGenerationCapture(both, link, version),
        ]) {
          expect(slots(capture)).toEqual(all);
          expect(slots(capture, "at-tolva")).toEqual(all);
        }
      });
    }
  }

  it("TCP segments of any size, reordered and repeated, give every frame once, in order", () => {
    fc.assert(
      fc.property(fc.integer({ min: 7, max: 500 }), fc.infiniteStream(fc.nat(9)), (size, random) => {
        const [first, ...segments] = tcp(stream(brack), size);
        const next = () => random.next().value;
        const mixed = segments.map((segment, k) => ({ segment, at: k + next() / 2 }));
        const twice = mixed.filter(() => next() === 0).map(({ segment, at }) => ({ segment, at: at + 3 }));
        const order = [...mixed, ...twice].sort((a, b) => a.at - b.at).map(({ segment }) => segment);
        expect(slots(classicCapture([first!, ...order]))).toEqual(all);
      }),
      { seed: 11, numRuns: 60 },
    );
  });

  it("a retransmission that begins earlier and reaches further is cut to what is new", () => {
    const bytes = Buffer.concat(stream(brack));
    const [first] = tcp(stream(brack), 100);
    const at = (from: number, to: number): Sent => ({
      protocol: "tcp",
      from: 4712,
      to: 50_000,
      sequence: 0xffff_ff00 + from,
      payload: bytes.subarray(from, to),
    });
    expect(slots(classicCapture([first!, at(0, 300), at(100, 700), at(650, bytes.length)]))).toEqual(all);
  });

  it("a segment that the capture lost costs the frames it held and no other", () => {
    const frames = stream(brack);
    const [first, ...segments] = tcp(frames, frames[1]!.length);
    const configurationSegments = Math.ceil(frames[0]!.length / frames[1]!.length);
    // Segments lie across two frames each.
    const lost = configurationSegments + 5;
    const left = slots(classicCapture([first!, ...segments.filter((_, k) => k !== lost)]));
    expect(left.length).toBe(COUNT - 2);
  });

  it("a capture that begins within a connection or ends within a packet is read as far as it goes", () => {
    const [, ...segments] = tcp([frameOf(brack, 90), ...stream(brack)], 40);
    const capture = classicCapture(segments.slice(1));
    expect(slots(capture)).toEqual(all);
    expect(slots(capture.subarray(0, -30)).length).toBe(COUNT - 1);
    expect(slots(nextGenerationCapture(segments.slice(1)).subarray(0, -30)).length).toBe(COUNT - 1);
  });

  it("an IDCODE that is not in it: says which are", () => {
    expect(() => slots(classicCapture(udp(stream(streamOf(9)))))).toThrow(RecordingError);
    expect(() => slots(classicCapture(udp(stream(streamOf(9)))))).toThrow(/no usable stream of IDCODE 1.*it holds 9/);
  });

  it("damaged anywhere: read as far as it goes or refused, never more", () => {
    const capture = nextGenerationCapture([...udp(stream(brack)), ...tcp(stream(tolva), 100)]);
    fc.assert(
      fc.property(fc.nat(capture.length - 1), fc.nat(255), (at, byte) => {
        const damaged = Buffer.from(capture);
        damaged[at] = byte;
        try {
          expect(slots(damaged).length).toBeLessThanOrEqual(COUNT);
        } catch (error) {
          expect(error).toBeInstanceOf(RecordingError);
        }
      }),
      { seed: 12, numRuns: 300 },
    );
  });

  it("the captures of these tests are what independent programs take them for", () => {
    const both = [...udp(stream(brack)), ...tcp(stream(tolva), 100)];
    for (const [name, capture, type] of [
      ["c.pcap", classicCapture(both, "ethernet", 6, false), "pcap"],
      ["n.pcapng", nextGenerationCapture(both, "loopback"), "pcapng"],
    ] as const) {
      const path = join(folder, name);
      writeFileSync(path, capture);
      const told = execFileSync("capinfos", ["-t", "-c", "-M", path], { encoding: "utf8" });
      expect(told).toMatch(new RegExp(`File type: .*${type}`));
      expect(told).toMatch(new RegExp(`Number of packets: *${both.length}\\b`));
      const flags = ["-r", path, "-d", "udp.port==4713,synphasor", "-d", "tcp.port==4712,synphasor"];
      const frames = execFileSync("tshark", [...flags, "-T", "fields", "-e", "synphasor.idcode_stream_source"], {
        encoding: "utf8",
        stdio: ["ignore", "pipe", "ignore"],
      });
      expect(frames.split(/[\s,]+/).filter((id) => id === "1").length).toBe(COUNT + 1);
      expect(frames.split(/[\s,]+/).filter((id) => id === "2").length).toBe(COUNT + 1);
    }
  });
});
