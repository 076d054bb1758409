/**
 * A terminal's six phasors read from the ring of its feed: primary volt and ampere, rms, currents positive into the line. The order of the
 * six is that of `channelRoles`: VA VB VC IA IB IC.
 */
import { bindTerminal, type Terminal } from "../config/index.ts";
import type { FrameRing } from "../ingest/types.ts";

/** re and im of six phasors. */
export const NUMBERS_PER_ROW = 12;

/** STAT bits 15-14: 00 is good, all else is "not to be used". Source: IEEE C37.118.2-2011, table 7, from memory. */
const STAT_DATA_ERROR = 0xc000;
/** STAT bit 13: set when the unit has lost its time reference (same source). */
const STAT_NOT_SYNCHRONISED = 0x2000;

export interface TerminalView {
  readonly terminal: Terminal;
  readonly ring: FrameRing;
  /**
   * Writes the frame of `slot` to `out[at..at+11]`; false when that frame is missing or marked as not to be used (then `out` is untouched).
   */
  readInto(slot: number, out: Float64Array, at: number): boolean;
  frequencyHz(slot: number): number;
  isSynchronised(slot: number): boolean;
}

export type Binding = { readonly view: TerminalView } | { readonly problem: string };

/** Fails, in words, when the terminal's channels are not in the ring. */
export function viewTerminal(terminal: Terminal, ring: FrameRing): Binding {
  const measured = terminal.measured;
  if (!measured) return { problem: `${terminal.id} is not measured` };
  const bound = bindTerminal(ring.columns, measured);
  if ("problem" in bound) return bound;
  const { columns } = bound;
  const unit = ring.units.findIndex((u) => u.idCode === measured.unitIdCode);
  if (unit < 0) return { problem: `feed ${ring.feedId} holds no unit ${measured.unitIdCode}` };
  const width = ring.columns.length * 2;
  const units = ring.units.length;
  const sign = measured.currentSign;
  return {
    view: {
      terminal,
      ring,
      readInto(slot, out, at) {
        const row = ring.rowOf(slot);
        if (row < 0 || (ring.stat[row * units + unit]! & STAT_DATA_ERROR) !== 0) return false;
        for (let k = 0; k < 6; k++) {
          const from = row * width + columns[k]! * 2;
          const s = k < 3 ? 1 : sign;
          out[at + 2 * k] = ring.phasors[from]! * s;
          out[at + 2 * k + 1] = ring.phasors[from + 1]! * s;
        }
        return true;
      },
      frequencyHz(slot) {
        const row = ring.rowOf(slot);
        return row < 0 ? Number.NaN : ring.frequencyHz[row * units + unit]!;
      },
      isSynchronised(slot) {
        const row = ring.rowOf(slot);
        return row >= 0 && (ring.stat[row * units + unit]! & STAT_NOT_SYNCHRONISED) === 0;
      },
    },
  };
}
