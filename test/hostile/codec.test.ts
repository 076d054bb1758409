import fc from "fast-check";
import { describe, expect, it } from "vitest";
import { encodeConfig } from "../../ingest/index.ts";
import { consumer } from "./consume.ts";
import { damaged, seeded } from "./mutations.ts";
import { corpus, dataFrames, START_US, seeds, streamOfFormat } from "./seeds.ts";

describe("hostile bytes", () => {
  it("the committed corpus, each input alone and all through one reader: no exception", () => {
    const all = corpus();
    expect(all.length).toBeGreaterThan(10);
    const one = consumer();
    for (const input of [...all, ...all]) {
      consumer().feed(input);
      one.feed(input);
    }
  });

  it("10,000 damaged streams through one reader: no exception, and a good stream is read again after them", () => {
    const random = seeded(7);
    const pool = [...seeds(), ...corpus()];
    const hostile = consumer();
    for (let n = 0; n < 10_000; n++)
      hostile.feed(damaged(pool[random(pool.length)]!, random, pool[random(pool.length)]!).subarray(0, 4096));
    expect(Object.values(hostile.reader.defects).reduce((a, b) => a + b, 0)).toBeGreaterThan(10_000);
    hostile.reader.end();
    const config = streamOfFormat(15);
    const before = hostile.rows;
    hostile.feed(Buffer.concat([encodeConfig(config, "configuration-2", START_US), ...dataFrames(config, 10, 1000)]));
    // A ring may just have held another time: two frames that agree make the new one believed.
    expect(hostile.rows - before).toBeGreaterThanOrEqual(9);
  });

  it("any bytes in any pieces end as frames, defects or a rest; the pieces do not matter", () => {
    fc.assert(
      fc.property(fc.uint8Array({ maxLength: 600 }), fc.nat(), fc.integer({ min: 1, max: 50 }), (noise, seed, size) => {
        const good = seeds()[seed % 16]!;
        const bytes = Buffer.concat([noise, good, noise, good]);
        const [whole, cut] = [consumer().reader, consumer().reader];
        whole.push(bytes);
        whole.end();
        for (let at = 0; at < bytes.length; at += size) cut.push(bytes.subarray(at, at + size));
        cut.end();
        expect(cut.frames).toBe(whole.frames);
        // How many stretches of noise there were depends on the pieces; what they cost does not.
        expect({ ...cut.defects, "no-sync": 0 }).toEqual({ ...whole.defects, "no-sync": 0 });
      }),
      { seed: 5, numRuns: 300 },
    );
  });
});
