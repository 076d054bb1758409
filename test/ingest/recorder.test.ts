import { appendFileSync, mkdtempSync, readdirSync, readFileSync, rmSync, statSync, truncateSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import pino from "pino";
import { afterAll, describe, expect, it } from "vitest";
import { encodeConfig, encodeConfig3, IncidentKeeper, Recorder, replayRecordings } from "../../ingest/index.ts";
import { plainNetwork } from "../pipeline/network.ts";
import { frameOf, streamOf } from "./unit-peer.ts";

const folder = mkdtempSync(join(tmpdir(), "spanmark-recorder-"));
afterAll(() => rmSync(folder, { recursive: true }));
const silent = pino({ level: "silent" });
const network = plainNetwork([
  { pmuClass: "M", reportingRateHz: 10 },
  { pmuClass: "M", reportingRateHz: 10 },
]);
const brack = streamOf(1, undefined, 10);
const START_S = 1_772_590_440;
const slots = (path: string, feedId = "at-brack") =>
  [...replayRecordings(network, new Map([[feedId, path]]), silent)].map((b) => b.lastSlot - START_S * 10);
const range = (from: number, to: number) => Array.from({ length: to - from }, (_, k) => from + k);
const framesOf = (path: string) => readdirSync(path).filter((name) => name.endsWith(".frames"));
const us = (slot: number) => START_S * 1e6 + slot * 1e5;
let count = 0;
function open(options: ConstructorParameters<typeof Recorder>[1] = {}, into = join(folder, `${count++}`)) {
  const troubles: string[] = [];
  const recorder = new Recorder(into, options);
  const writer = recorder.writerFor("at-brack", (words) => troubles.push(words));
  const put = (frame: Buffer) => writer.write(frame, 0, frame.length);
  /** As time goes by: what was written has reached the disk before a file ends. */
  const putAll = async (all: readonly number[]) => {
    for (const slot of all) {
      put(frameOf(brack, slot));
      if (slot % 10 === 9) await writer.settle();
    }
  };
  return { recorder, writer, put, putAll, troubles, root: into, path: join(into, "feeds", "at-brack") };
}
const configuration = encodeConfig(brack, "configuration-2", 0);

describe("continuous recording", () => {
  it("rotates by time span and by size; each file replays alone, the folder as one", async () => {
    for (const options of [{ fileS: 3 }, { fileBytes: configuration.length + 30 * frameOf(brack, 0).length }]) {
      const { recorder, put, path } = open(options);
      put(configuration);
      for (const slot of range(0, 100)) put(frameOf(brack, slot));
      await recorder.close();
      const names = framesOf(path);
      expect(names.length).toBe(4);
      expect(slots(join(path, names[1]!))).toEqual(range(30, 60));
      expect(slots(path)).toEqual(range(0, 100));
    }
  });

  it("deletes old files by age and by size, with their indices, and never what is held", async () => {
    const { recorder, put, putAll, path } = open({ fileS: 1, keepS: 3 });
    put(configuration);
    await putAll(range(0, 100));
    recorder.holdFrom("storm", us(72));
    await putAll(range(100, 200));
    await recorder.close();
    const left = slots(path);
    expect(left[0]).toBeGreaterThan(50);
    expect(left[0]).toBeLessThanOrEqual(72);
    expect(left.at(-1)).toBe(199);
    expect(readdirSync(path).length).toBe(2 * framesOf(path).length);

    const small = open({ fileS: 1, keepBytes: 3000 });
    small.put(configuration);
    await small.putAll(range(0, 100));
    await small.recorder.close();
    const sizes = framesOf(small.path).map((name) => statSync(join(small.path, name)).size);
    expect(sizes.reduce((a, b) => a + b, 0)).toBeLessThan(3000 + 2 * sizes[0]!);
  });

  it("a changed configuration begins a file; the same again does not; configuration 3 in pieces is kept whole", async () => {
    const { recorder, put, path } = open();
    put(configuration);
    put(frameOf(brack, 0));
    put(encodeConfig(brack, "configuration-2", 5e6));
    put(frameOf(brack, 1));
    const changed = { ...brack, units: [{ ...brack.units[0]!, name: "renamed" }] };
    for (const frame of encodeConfig3(changed, 0, 100)) put(frame);
    put(frameOf(changed, 2));
    put(frameOf(changed, 3));
    await recorder.close();
    const names = framesOf(path);
    expect(names.length).toBe(2);
    expect(slots(join(path, names[1]!))).toEqual([2, 3]);
    expect(slots(path).length).toBeGreaterThanOrEqual(2);
  });

  it("a torn last frame and a torn index are cut on reading, and recording goes on behind them", async () => {
    const first = open();
    first.put(configuration);
    for (const slot of range(0, 50)) first.put(frameOf(brack, slot));
    await first.recorder.close();
    const [name] = framesOf(first.path) as [string];
    const file = join(first.path, name);
    truncateSync(file, statSync(file).size - 20);
    appendFileSync(file.replace(".frames", ".index"), "torn");
    expect(slots(file)).toEqual(range(0, 49));
    const second = open({}, first.root);
    second.put(configuration);
    for (const slot of range(50, 60)) second.put(frameOf(brack, slot));
    const kept = await second.recorder.keepIncident("one", us(45), us(54));
    await second.recorder.close();
    expect(slots(first.path)).toEqual([...range(0, 49), ...range(50, 60)]);
    expect(slots(kept[0]!.path)).toEqual([45, 46, 47, 48, 50, 51, 52, 53, 54]);
  });

  it("tells when a file cannot be written, once, and goes on with the next", async () => {
    const { recorder, writer, put, path, troubles } = open({ fileS: 1 });
    put(configuration);
    put(frameOf(brack, 0));
    await writer.settle();
    rmSync(path, { recursive: true });
    writeFileSync(path, "a file where the folder was");
    for (const slot of range(10, 40)) put(frameOf(brack, slot));
    await recorder.close();
    expect(troubles.length).toBeGreaterThan(0);
    expect(troubles.join()).toMatch(/cannot be/);
    rmSync(path);
  });
});

describe("what is kept of an incident", () => {
  it("spans the files it lies in, seeks by the index, and outlives the rotation", async () => {
    const { recorder, put, putAll, path, root } = open({ fileS: 20, keepS: 40 });
    put(configuration);
    await putAll(range(0, 500));
    const kept = await recorder.keepIncident("brack-tolva/1", us(355), us(415));
    expect(kept).toEqual([{ feedId: "at-brack", frames: 61, path: join(root, "incidents", "brack-tolva_1", "at-brack.frames") }]);
    await putAll(range(500, 2000));
    await recorder.close();
    expect(slots(path)[0]).toBeGreaterThan(415);
    expect(slots(kept[0]!.path)).toEqual(range(355, 416));
    // The same without an index, from the file's start.
    const again = open({}, root);
    for (const name of readdirSync(path)) if (name.endsWith(".index")) rmSync(join(path, name));
    const whole = await again.recorder.keepIncident("later", us(1905), us(1910));
    await again.recorder.close();
    expect(slots(whole[0]!.path)).toEqual(range(1905, 1911));
  });

  it("from the news of it: ten seconds before the onset until the end; a stretch without frames leaves no file", async () => {
    const { recorder, put, putAll, root } = open({ fileS: 5, keepS: 10 });
    const keeper = new IncidentKeeper(recorder, silent);
    put(configuration);
    await putAll(range(0, 210));
    keeper.note({ disturbanceId: "d1", kind: "noticed", onsetUs: us(200), dataTimeUs: us(203) });
    keeper.note({ disturbanceId: "d1", kind: "located", onsetUs: us(200), dataTimeUs: us(205) });
    await keeper.settle();
    const path = join(root, "incidents", "d1", "at-brack.frames");
    expect(slots(path)).toEqual(range(100, 206));
    const { length } = readFileSync(path);
    await putAll(range(210, 400)); // the rotation would have deleted the beginning
    keeper.note({ disturbanceId: "d1", kind: "ended", dataTimeUs: us(300) });
    await keeper.settle();
    expect(slots(path)).toEqual(range(100, 301));
    expect(readFileSync(path).length).toBeGreaterThan(length);
    expect(await recorder.keepIncident("none", us(5000), us(5001))).toEqual([]);
    await recorder.close();
    expect(readdirSync(join(root, "incidents", "none"))).toEqual([]);
  });
});
