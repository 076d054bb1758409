import { type ChannelRole, channelRoles, type Terminal } from "./model.ts";

/** What a stream's configuration says of one phasor. */
export interface StreamColumn {
  readonly unitIdCode: number;
  readonly name: string;
  readonly indexInUnit: number;
}

/**
 * Finds a terminal's six phasors among a stream's, by name or by position in the unit.
 * @returns columns in the order of `channelRoles`, or in words what is missing and what there is
 */
export function bindTerminal(
  columns: readonly StreamColumn[],
  measured: NonNullable<Terminal["measured"]>,
): { readonly columns: readonly number[] } | { readonly problem: string } {
  const own = columns.filter((c) => c.unitIdCode === measured.unitIdCode);
  if (own.length === 0) {
    const units = [...new Set(columns.map((c) => c.unitIdCode))];
    return {
      problem: `unit ${measured.unitIdCode} is not in the stream of feed ${measured.feedId}; it holds ${units.join(", ") || "none"}`,
    };
  }
  const find = (role: ChannelRole) => {
    const wanted = measured.channels[role];
    return columns.findIndex(
      (c) => c.unitIdCode === measured.unitIdCode && (typeof wanted === "number" ? c.indexInUnit === wanted : c.name === wanted),
    );
  };
  const found = channelRoles.map(find);
  const missing = channelRoles.filter((_, k) => found[k]! < 0);
  if (missing.length > 0) {
    const names = missing.map((role) => `${role} = ${JSON.stringify(measured.channels[role])}`).join(", ");
    return {
      problem: `channel not in the stream of feed ${measured.feedId}: ${names}; it holds ${own.map((c) => `"${c.name}"`).join(", ")}`,
    };
  }
  return { columns: found };
}
