/** The confidence flag and its reasons, in words that an operator can read out. */
import type { Combined } from "./combine.ts";
import type { Flag, LocateStage } from "./types.ts";

/** `firm`: a crew searches a few spans. `fair`: an hour on foot or one flight leg. Both of the line's length, since phasor errors grow with it. */
const FIRM_STRETCH = 0.02;
const FAIR_STRETCH = 0.08;
/** Answers further apart than this share of the line do not agree, whatever their own spreads allow. */
const SPREAD = 0.04;
/** Residual of the unmixing fit (relative) under which nearly all fits are good, and over which the fit says that its model is wrong. Measured on the
 * simulator's campaigns. */
const GOOD_RESIDUAL = 0.005;
const POOR_RESIDUAL = 0.02;

export interface FlagInputs {
  readonly combined: Combined;
  readonly lengthKm: number;
  readonly stage: LocateStage;
  /** Station names of the measured ends that counted, in order. */
  readonly measuredAt: readonly string[];
  readonly unmeasured: readonly string[];
  /** Relative residual of the unmixing; undefined when whole-window or mid-fault frames were used. */
  readonly residual: number | undefined;
  readonly frames: string;
  readonly phaseMarginDegrees: number;
  readonly missingFrames: number;
  readonly unsynchronisedAt: readonly string[];
  readonly isStillOn: boolean;
  /** What stands on this line that no method allows for, in words. */
  readonly unmodelled: readonly string[];
}

export function flagOf(x: FlagInputs): { flag: Flag; reasons: string[] } {
  const width = x.combined.pieces.reduce((s, p) => s + p.highKm - p.lowKm, 0) / x.lengthKm;
  const reasons: string[] = [];
  const isSpread = x.combined.spreadKm > SPREAD * x.lengthKm;
  if (x.measuredAt.length >= 2) {
    if (x.combined.isQuarrel) reasons.push(`methods disagree by up to ${x.combined.spreadKm.toFixed(1)} km: each place is shown`);
    else if (isSpread) reasons.push(`answers spread over ${x.combined.spreadKm.toFixed(1)} km`);
    else reasons.push(`both ends agree within ${Math.max(0.1, x.combined.spreadKm).toFixed(1)} km`);
  } else {
    reasons.push(`one end only (${x.measuredAt.join(", ")})`);
    if (x.unmeasured.length > 0) reasons.push(`source behind ${x.unmeasured.join(", ")} assumed`);
  }
  reasons.push(x.frames);
  if (x.residual !== undefined) {
    const percent = `${(x.residual * 100).toFixed(1)} %`;
    if (x.residual < GOOD_RESIDUAL) reasons.push(`measured frames fitted within ${percent}`);
    else if (x.residual < POOR_RESIDUAL) reasons.push(`fit leaves ${percent} unexplained: stretch widened`);
    else reasons.push(`poor fit, ${percent} unexplained: measuring window or changing fault not as assumed`);
  }
  if (x.phaseMarginDegrees < 8) reasons.push("phases close to call");
  if (x.missingFrames > 0) reasons.push(`${x.missingFrames} frame${x.missingFrames === 1 ? "" : "s"} missing`);
  for (const station of x.unsynchronisedAt) reasons.push(`clock at ${station} not synchronised`);
  reasons.push(...x.unmodelled);
  if (x.isStillOn) reasons.push("fault current still flows");
  if (x.stage === "provisional") reasons.push("so far: more frames to come");
  const isDoubtful =
    x.combined.isQuarrel ||
    isSpread ||
    x.unmodelled.length > 0 ||
    (x.residual ?? 0) > POOR_RESIDUAL ||
    x.unsynchronisedAt.length > 0 ||
    x.phaseMarginDegrees < 8;
  const flag: Flag =
    width <= FIRM_STRETCH && !isDoubtful && x.measuredAt.length >= 2
      ? "firm"
      : width <= FAIR_STRETCH && !isDoubtful
        ? "fair"
        : "rough";
  return { flag, reasons };
}
