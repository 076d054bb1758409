/** One line of 150 km between Brack and Tolva for the pipeline's tests, without capacitance: what two-source-network.ts solves by hand. */
import type { Line, Network, PmuClass, Terminal } from "../../config/index.ts";
import { example } from "../published/two-source-network.ts";

export function plainNetwork(ends: readonly ({ pmuClass: PmuClass; reportingRateHz: number } | undefined)[]): Network {
  const { z1, z0 } = example({});
  const transformer = { ratioPercent: 0.01, angleMinutes: 0.5 };
  const stations = [
    { id: "brack", name: "Brack" },
    { id: "tolva", name: "Tolva" },
  ];
  const terminals = stations.map((station, index): Terminal => {
    const unit = ends[index];
    const channels = { VA: "VA", VB: "VB", VC: "VC", IA: "IA", IB: "IB", IC: "IC" };
    const measured = unit && {
      feedId: `at-${station.id}`,
      unitIdCode: index + 1,
      channels,
      currentSign: 1 as const,
      vtSide: "bus" as const,
      currentTransformer: transformer,
      voltageTransformer: transformer,
    };
    return {
      id: `brack-tolva/${station.id}`,
      lineId: "brack-tolva",
      stationId: station.id,
      index,
      source: "synchronous",
      ...(measured ? { measured } : {}),
    };
  });
  const line: Line = {
    id: "brack-tolva",
    name: "Brack-Tolva",
    nominalKv: 230,
    lengthKm: 150,
    constants: { z1, z0, b1: 0, b0: 0, z1Percent: 0.1, z0Percent: 0.1 },
    terminals,
    towers: Array.from({ length: 501 }, (_, k) => ({ number: String(k + 1), km: k * 0.3 })),
  };
  const feeds = ends.flatMap((unit, index) =>
    unit ? [{ id: `at-${stations[index]!.id}`, address: "tcp://127.0.0.1:1", idCode: index + 1, ...unit }] : [],
  );
  return {
    name: "plain",
    frequencyHz: 60,
    phaseNames: ["A", "B", "C"],
    timeZone: "Etc/UTC",
    stations,
    feeds,
    lines: [line],
    channels: [],
  };
}
