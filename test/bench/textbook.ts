/** What a textbook method says on the raw frame in the middle of the fault: the yardstick that unmixing is measured against. */
import type { Line } from "../../config/index.ts";
import type { FrameRing } from "../../ingest/types.ts";
import { div, scale, sub } from "../../pipeline/complex.ts";
import { loopCurrent, loopVoltage, superimposedLoopCurrent } from "../../pipeline/fault-loop.ts";
import { sequenceLine } from "../../pipeline/long-line.ts";
import { difference, takagi } from "../../pipeline/methods/takagi.ts";
import { twoEndedSynchronised } from "../../pipeline/methods/two-ended.ts";
import { type Abc, toSequence } from "../../pipeline/sequence.ts";
import type { FaultType } from "../../pipeline/types.ts";

interface RawFrame {
  readonly v: Abc;
  readonly i: Abc;
}

/** The frame nearest to a time. */
function frameAt(ring: FrameRing, timeUs: number): RawFrame {
  const row = ring.rowOf(Math.round(timeUs / ring.periodUs));
  const phasor = (k: number) => ({ re: ring.phasors[row * 12 + 2 * k]!, im: ring.phasors[row * 12 + 2 * k + 1]! });
  return { v: [phasor(0), phasor(1), phasor(2)], i: [phasor(3), phasor(4), phasor(5)] };
}

/** km from the line's first terminal: Takagi from one ring, negative (three-phase: superimposed positive) sequence from two. */
export function textbookKm(line: Line, type: FaultType, rings: readonly FrameRing[], onsetUs: number, durationS: number): number {
  const ends = rings.map((ring) => {
    const fault = frameAt(ring, onsetUs + (durationS * 1e6) / 2);
    const pre = frameAt(ring, onsetUs - 0.4e6);
    return {
      fault,
      deltaV: difference(toSequence(fault.v), toSequence(pre.v)),
      deltaI: difference(toSequence(fault.i), toSequence(pre.i)),
    };
  });
  const { z1, z0 } = line.constants;
  const [a, b] = ends;
  if (a && b) {
    const s = type === "ABC" ? "positive" : "negative";
    return (
      line.lengthKm *
      twoEndedSynchronised(sequenceLine(z1, 0), { v: a.deltaV[s], i: a.deltaI[s] }, { v: b.deltaV[s], i: b.deltaI[s] }).re
    );
  }
  const k0 = div(sub(z0, z1), scale(z1, 3));
  return (
    line.lengthKm *
    takagi(loopVoltage(type, a!.fault.v), loopCurrent(type, a!.fault.i, k0), superimposedLoopCurrent(type, a!.deltaI), z1)
  );
}
