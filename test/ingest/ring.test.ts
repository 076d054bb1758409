import { describe, expect, it } from "vitest";
import { encodeData, type StreamConfig } from "../../ingest/index.ts";
import { WritableRing } from "../../ingest/ring.ts";

const config: StreamConfig = {
  idCode: 1,
  timeBase: 1_000_000,
  reportingRateHz: 60,
  units: [
    {
      name: "u",
      idCode: 1,
      phasorsArePolar: false,
      phasorsAreFloat: true,
      analogsAreFloat: true,
      frequencyIsFloat: true,
      phasors: [{ name: "VA", kind: "voltage", perBit: 1 }],
      analogs: [],
      digitals: [],
      nominalHz: 60,
      configurationCount: 1,
    },
  ],
};
const FIRST = 1_700_000_000 * 60;
const timeOf = (slot: number) => Math.round(((FIRST + slot) * 1e6) / 60);
const put = (ring: WritableRing, slot: number, value = slot) => {
  const frame = encodeData(config, timeOf(slot), [{ stat: 0, phasors: [value, 0], frequencyHz: 60, rocofHzPerS: 0 }]);
  return ring.put(new DataView(frame.buffer, frame.byteOffset, frame.length), 0, 5);
};
const value = (ring: WritableRing, slot: number) => {
  const row = ring.rowOf(FIRST + slot);
  return row < 0 ? undefined : ring.phasors[row * 2];
};

describe("the ring", () => {
  it("puts each frame in its slot, leaves gaps as gaps, and takes a late one into its own place", () => {
    const ring = new WritableRing("f", config);
    expect([0, 1, 4, 3].map((s) => put(ring, s))).toEqual(["new", "new", "new", "new"]);
    expect([0, 1, 2, 3, 4].map((s) => value(ring, s))).toEqual([0, 1, undefined, 3, 4]);
    expect(ring.newestSlot).toBe(FIRST + 4);
    expect(ring.timeUs[ring.rowOf(FIRST + 4)]).toBe(timeOf(4));
  });
  it("keeps the first of two frames of one time", () => {
    const ring = new WritableRing("f", config);
    put(ring, 0, 10);
    expect(put(ring, 0, 20)).toBe("duplicate");
    expect(value(ring, 0)).toBe(10);
  });
  it("forgets the oldest, and refuses what comes after its row was given away", () => {
    const ring = new WritableRing("f", config);
    expect(ring.capacity).toBe(1024);
    for (let s = 0; s <= 590; s++) put(ring, s);
    for (let s = 591; s <= 1600; s += 590) put(ring, s);
    expect(value(ring, 0)).toBe(0);
    put(ring, 1024);
    expect(value(ring, 0)).toBeUndefined();
    expect(put(ring, 1600)).toBe("new");
    expect(put(ring, 570)).toBe("doubtful-time"); // over 10 s back: only believed when the next agrees
  });
  it("believes a jump of the clock only when a second frame agrees, and then begins anew", () => {
    const ring = new WritableRing("f", config);
    put(ring, 0);
    expect(put(ring, 1_000_000)).toBe("doubtful-time");
    expect(put(ring, 1)).toBe("new");
    expect(ring.newestSlot).toBe(FIRST + 1);
    expect(put(ring, 2_000_000)).toBe("doubtful-time");
    expect(put(ring, 2_000_001)).toBe("new");
    expect(ring.newestSlot).toBe(FIRST + 2_000_001);
    expect(value(ring, 1)).toBeUndefined();
  });
});
