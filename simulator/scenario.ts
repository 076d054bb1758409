/** What is simulated, as data: which line, which fault, when, how it is cleared and measured. */
import { z } from "zod";
import type { Network } from "../config/index.ts";

export const scenarioSchema = z.strictObject({
  line: z.string().describe("Line id of the network file"),
  /** Absent: nothing happens. */
  fault: z
    .strictObject({
      type: z.enum(["AG", "BG", "CG", "AB", "BC", "CA", "ABG", "BCG", "CAG", "ABC"]),
      km: z.number().nonnegative().describe("From the line's first terminal"),
      ohm: z.number().nonnegative(),
      /** After the scenario's start. */
      atS: z.number().min(1).default(2),
      /** After the onset, at each end: when the breaker is told to open. Poles wait for current zeros. */
      openAfterS: z.tuple([z.number().positive(), z.number().positive()]).default([0.07, 0.074]),
    })
    .optional(),
  durationS: z.number().positive().max(3600).default(5),
  /** UTC start, whole seconds. */
  startS: z.int().positive().default(1_772_590_440),
  /** Standard deviation of each frame's noise, relative to the channel's size. */
  noise: z.number().nonnegative().default(0.0005),
  /** 0: perfect instrument transformers; 1: errors anywhere within their class. */
  instrumentErrors: z.number().min(0).max(1).default(0),
  seed: z.int().nonnegative().default(1),
});
export type Scenario = z.output<typeof scenarioSchema>;

export class ScenarioError extends Error {
  constructor(words: string) {
    super(words);
    this.name = "ScenarioError";
  }
}

const fault = (type: string, km: number, ohm: number, openAfterS: readonly [number, number] = [0.07, 0.074]) => ({
  type,
  km,
  ohm,
  openAfterS: [...openAfterS],
});
const library: Readonly<Record<string, z.input<typeof scenarioSchema>>> = {
  quiet: { line: "brack-tolva" },
  "brack-tolva-a-ground": { line: "brack-tolva", fault: fault("AG", 41.3, 4) as never },
  "brack-tolva-bc": { line: "brack-tolva", fault: fault("BC", 97.8, 1.5, [0.058, 0.066]) as never },
  "tolva-quenby-1-c-ground": { line: "tolva-quenby-1", fault: fault("CG", 22.6, 12, [0.075, 0.07]) as never },
  "quenby-ister-2-abc": { line: "quenby-ister-2", fault: fault("ABC", 201.4, 1, [0.05, 0.055]) as never },
  "ister-nolde-ca-ground": { line: "ister-nolde", fault: fault("CAG", 66, 6, [0.065, 0.09]) as never },
};

export const scenarioNames = (): string[] => Object.keys(library);

/** @throws ScenarioError for a name that the library lacks */
export function namedScenario(name: string): Scenario {
  const found = library[name];
  if (!found) throw new ScenarioError(`no scenario "${name}"; there are ${scenarioNames().join(", ")}`);
  return scenarioSchema.parse(found);
}

/**
 * @throws ScenarioError when it does not fit the network: no such line, fault beyond the line's end, negative resistance
 */
export function checkedScenario(input: unknown, network: Network): Scenario {
  const read = scenarioSchema.safeParse(input);
  if (!read.success) throw new ScenarioError(`scenario: ${z.prettifyError(read.error)}`);
  const scenario = read.data;
  const line = network.lines.find((l) => l.id === scenario.line);
  if (!line)
    throw new ScenarioError(
      `scenario: no line "${scenario.line}" in ${network.name}; it has ${network.lines.map((l) => l.id).join(", ")}`,
    );
  if (scenario.fault && scenario.fault.km > line.lengthKm)
    throw new ScenarioError(`scenario: the fault lies at km ${scenario.fault.km}, ${line.name} ends at ${line.lengthKm} km`);
  return scenario;
}
