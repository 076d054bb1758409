import { mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import pino from "pino";
import { afterAll, describe, expect, it } from "vitest";
import { encodeConfig, RecordingError, recordingErrorCodes, replayRecordings } from "../../ingest/index.ts";
import { plainNetwork } from "../pipeline/network.ts";
import { frameOf, streamOf } from "./unit-peer.ts";

const folder = mkdtempSync(join(tmpdir(), "spanmark-replay-"));
afterAll(() => rmSync(folder, { recursive: true }));
const silent = pino({ level: "silent" });
const network = plainNetwork([
  { pmuClass: "M", reportingRateHz: 60 },
  { pmuClass: "M", reportingRateHz: 30 },
]);

function recording(
  name: string,
  config: ReturnType<typeof streamOf>,
  slots: readonly number[],
  before = Buffer.alloc(0),
): string {
  const path = join(folder, name);
  writeFileSync(
    path,
    Buffer.concat([before, encodeConfig(config, "configuration-2", 0), ...slots.map((s) => frameOf(config, s))]),
  );
  return path;
}
const a = recording("a.frames", streamOf(1), [0, 1, 2, 3]);
const b = recording("b.frames", streamOf(2, undefined, 30), [0, 1]);
const files = (one: string, two = b) =>
  new Map([
    ["at-brack", one],
    ["at-tolva", two],
  ]);

describe("replayed recordings", () => {
  it("are interleaved by time, one frame a block, the same order every time", () => {
    const play = () =>
      [...replayRecordings(network, files(a), silent)].map(
        (block) => `${block.feedId} ${block.ring.timeUs[block.ring.rowOf(block.lastSlot)]! % 1e6}`,
      );
    expect(play()).toEqual(["at-brack 0", "at-tolva 0", "at-brack 16667", "at-brack 33333", "at-tolva 33333", "at-brack 50000"]);
    expect(play()).toEqual(play());
  });

  it("go on after bad bytes and a tail cut short", () => {
    const path = join(folder, "torn.frames");
    writeFileSync(
      path,
      Buffer.concat([
        readFileSync(a).subarray(0, -40),
        Buffer.from("noise"),
        frameOf(streamOf(1), 9),
        frameOf(streamOf(1), 10).subarray(0, 9),
      ]),
    );
    expect([...replayRecordings(network, new Map([["at-brack", path]]), silent)].length).toBe(4);
  });

  it.each([
    ["unreadable", () => files(join(folder, "none")), /none: cannot be read/],
    ["unknown-feed", () => new Map([["at-nolde", a]]), /no feed "at-nolde" in the network file; it has at-brack, at-tolva/],
    ["no-configuration", () => files(join(folder, "empty")), /no configuration frame at its start/],
    ["wrong-id-code", () => files(recording("other.frames", streamOf(9), [0])), /another IDCODE than 1/],
    [
      "unknown-channel",
      () => files(recording("names.frames", streamOf(1, ["UA", "UB", "UC", "IA", "IB", "IC"]), [0])),
      /VA = "VA".*it holds "UA"/,
    ],
  ] as const)("are refused when they do not fit: %s", (code, which, words) => {
    writeFileSync(join(folder, "empty"), "");
    expect(recordingErrorCodes).toContain(code);
    try {
      [...replayRecordings(network, which(), silent)];
      expect.unreachable();
    } catch (error) {
      expect(error).toBeInstanceOf(RecordingError);
      expect(error).toMatchObject({ code, message: expect.stringMatching(words) });
    }
  });
});
