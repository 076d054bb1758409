/**
 * Methods on phasors whose place is known by hand calculation: sequence networks of a lumped two-source line (see two-source-network.ts).
 * Tolerances: 0.01 % of the line from two ends. From one end the formula's own error is R·|If|·sin(angle between If and ΔI) over |Z1·I|: with this
 * network's distribution factors turned by up to 4 degrees, under 0.5 % of the line up to 5 ohm, under 2 % at 25 ohm.
 */
import { describe, expect, it } from "vitest";
import { loopCurrent, loopVoltage, superimposedLoopCurrent } from "../../pipeline/fault-loop.ts";
import { sequenceLine } from "../../pipeline/long-line.ts";
import { eriksson } from "../../pipeline/methods/eriksson.ts";
import { simpleReactance } from "../../pipeline/methods/reactance.ts";
import { difference, takagi, takagiLongLine } from "../../pipeline/methods/takagi.ts";
import { twoEndedSynchronised } from "../../pipeline/methods/two-ended.ts";
import { leadOfFaultCurrent, wiszniewski } from "../../pipeline/methods/wiszniewski.ts";
import { selectPhases } from "../../pipeline/phase-selection.ts";
import { type Abc, toSequence } from "../../pipeline/sequence.ts";
import { faultTypes } from "../../pipeline/types.ts";
import { type C, example, solve } from "./two-source-network.ts";

const v = (x: C[]): Abc => [x[0]!, x[1]!, x[2]!];
const i = (x: C[]): Abc => [x[3]!, x[4]!, x[5]!];

for (const type of faultTypes) {
  describe(`${type} on a lumped line between two sources`, () => {
    for (const m of [0.1, 0.35, 0.6, 0.9]) {
      for (const ohm of [0.1, 5, 25]) {
        const network = example({ type, m, ohm });
        const { a, b } = solve(network);
        const seq = (end: typeof a) => {
          const fault = { v: toSequence(v(end.fault)), i: toSequence(i(end.fault)) };
          const pre = { v: toSequence(v(end.pre)), i: toSequence(i(end.pre)) };
          return { ...fault, deltaV: difference(fault.v, pre.v), deltaI: difference(fault.i, pre.i) };
        };
        const [sa, sb] = [seq(a), seq(b)];
        const k0 = { re: 0, im: 0 };
        const dz = { re: network.z0.re - network.z1.re, im: network.z0.im - network.z1.im };
        const d = 3 * (network.z1.re ** 2 + network.z1.im ** 2);
        k0.re = (dz.re * network.z1.re + dz.im * network.z1.im) / d;
        k0.im = (dz.im * network.z1.re - dz.re * network.z1.im) / d;
        const lines = { line1: sequenceLine(network.z1, 0), line0: sequenceLine(network.z0, 0) };

        it(`is placed by Takagi and from two ends: m ${m}, ${ohm} ohm`, () => {
          const loopV = loopVoltage(type, v(a.fault));
          const loopI = loopCurrent(type, i(a.fault), k0);
          const textbook = takagi(loopV, loopI, superimposedLoopCurrent(type, sa.deltaI), network.z1);
          expect(Math.abs(textbook - m)).toBeLessThan(ohm > 5 ? 0.02 : 0.005);
          // With no capacitance the long-line condition is the textbook's.
          expect(takagiLongLine(type, sa, lines)).toBeCloseTo(textbook, 6);
          const positive = twoEndedSynchronised(
            lines.line1,
            { v: sa.deltaV.positive, i: sa.deltaI.positive },
            { v: sb.deltaV.positive, i: sb.deltaI.positive },
          );
          expect(Math.abs(positive.re - m)).toBeLessThan(1e-4);
          if (type !== "ABC") {
            const negative = twoEndedSynchronised(
              lines.line1,
              { v: sa.v.negative, i: sa.i.negative },
              { v: sb.v.negative, i: sb.i.negative },
            );
            expect(Math.abs(negative.re - m)).toBeLessThan(1e-4);
          }
          if (ohm < 1) expect(Math.abs(simpleReactance(loopV, loopI, network.z1) - m)).toBeLessThan(0.02);
        });

        it(`is placed within 0.01 % when the sources are known (Eriksson; Wiszniewski with its angle): m ${m}, ${ohm} ohm`, () => {
          const loopV = loopVoltage(type, v(a.fault));
          const loopI = loopCurrent(type, i(a.fault), k0);
          const delta = superimposedLoopCurrent(type, sa.deltaI);
          const answer = eriksson(loopV, loopI, delta, network.z1, network.sA1, network.sB1);
          expect(Math.abs(answer!.m - m)).toBeLessThan(1e-4);
          const angle = -leadOfFaultCurrent(m, network.z1, network.sA1, network.sB1);
          expect(Math.abs(wiszniewski(loopV, loopI, delta, network.z1, angle) - m)).toBeLessThan(1e-4);
        });

        it(`is named from both ends' currents and from one end's: m ${m}, ${ohm} ohm`, () => {
          const sum = {
            zero: { re: sa.deltaI.zero.re + sb.deltaI.zero.re, im: sa.deltaI.zero.im + sb.deltaI.zero.im },
            positive: { re: sa.deltaI.positive.re + sb.deltaI.positive.re, im: sa.deltaI.positive.im + sb.deltaI.positive.im },
            negative: { re: sa.deltaI.negative.re + sb.deltaI.negative.re, im: sa.deltaI.negative.im + sb.deltaI.negative.im },
          };
          expect(selectPhases(sum).type).toBe(type);
          expect(selectPhases(sa.deltaI).type).toBe(type);
        });
      }
    }
  });
}
