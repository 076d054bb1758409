import type { Network } from "../../config/index.ts";
import type { FaultType } from "../../pipeline/types.ts";

/** "A to ground", "B to C", "B and C to ground", "A, B and C", in the utility's own phase names. */
export function phaseWords(type: FaultType, network: Pick<Network, "phaseNames">): string {
  const names = [...type.replace("G", "")].map((p) => network.phaseNames["ABC".indexOf(p)]!);
  if (names.length === 3) return `${names[0]}, ${names[1]} and ${names[2]}`;
  if (names.length === 1) return `${names[0]} to ground`;
  return type.endsWith("G") ? `${names[0]} and ${names[1]} to ground` : `${names[0]} to ${names[1]}`;
}
