/** What a network file may hold. `networkJsonSchema` gives the same to editors. */
import { z } from "zod";
import { parseAddress } from "./address.ts";
import { channelRoles } from "./model.ts";

const id = z
  .string()
  .regex(/^[a-z0-9][a-z0-9.-]*$/, "lower-case letters, digits, dots and hyphens")
  .describe("Lower-case letters, digits, dots and hyphens; unique in its list");
const positive = z.number().positive();
const impedance = z.tuple([z.number(), z.number()]).describe("[resistance, reactance] in ohm");

const transformer = z
  .union([
    z.strictObject({ class: z.enum(["0.1", "0.2", "0.5", "1", "3"]).describe("Accuracy class of IEC 61869") }),
    z.strictObject({ ratioPercent: z.number().nonnegative(), angleMinutes: z.number().nonnegative() }),
  ])
  .describe("Accuracy: a class, or limits of ratio error [%] and phase displacement [minutes]");

const lineConstants = z.strictObject({
  r1Ohm: z.number().nonnegative(),
  x1Ohm: positive,
  r0Ohm: z.number().nonnegative(),
  x0Ohm: positive,
  b1MicroSiemens: z.number().nonnegative().default(0),
  b0MicroSiemens: z.number().nonnegative().default(0),
});

const channelOf = z
  .union([z.string().min(1), z.int().nonnegative()])
  .describe("Channel name, or position among the unit's phasors from 0");
const channels = z.strictObject(
  Object.fromEntries(channelRoles.map((role) => [role, channelOf.default(role)])) as Record<
    (typeof channelRoles)[number],
    z.ZodDefault<typeof channelOf>
  >,
);

const terminal = z.strictObject({
  station: id,
  source: z.enum(["synchronous", "converter", "unknown"]).default("synchronous").describe("What feeds the line here"),
  sourceZ1: impedance.optional(),
  sourceZ0: impedance.optional(),
  feed: id.optional().describe("Leave out when this end is not measured"),
  unit: z.int().min(1).max(65534).optional().describe("IDCODE of the unit in a concentrated stream; default: the stream's"),
  channels: channels.prefault({}),
  current: z
    .enum(["intoLine", "outOfLine"])
    .default("intoLine")
    .describe("Direction in which the measured current counts as positive"),
  vtSide: z.enum(["line", "bus"]).default("line"),
  currentTransformer: transformer.default({ class: "0.5" }),
  voltageTransformer: transformer.default({ class: "0.5" }),
});

const tower = z.strictObject({
  number: z
    .union([z.string().min(1), z.int()])
    .transform(String)
    .describe("As painted on the tower"),
  km: z.number().nonnegative(),
  latitude: z.number().min(-90).max(90).optional(),
  longitude: z.number().min(-180).max(180).optional(),
});
const evenTowers = z.strictObject({
  first: z.int().default(1),
  spanKm: positive.describe("Mean span; towers stand evenly between the stations"),
});

const line = z.strictObject({
  id,
  name: z.string().min(1).optional(),
  nominalKv: positive,
  lengthKm: positive,
  perKm: lineConstants.optional(),
  total: lineConstants.optional(),
  uncertaintyPercent: z
    .strictObject({ z1: positive.default(2), z0: positive.default(10) })
    .prefault({})
    .describe("Relative standard uncertainty of the constants"),
  parallel: z
    .strictObject({ line: id, z0m: impedance.describe("Zero-sequence mutual impedance of the whole length, ohm") })
    .optional(),
  seriesCapacitor: z
    .strictObject({
      atKm: z.number().nonnegative(),
      reactanceOhm: positive,
      varistorKv: positive.optional().describe("Peak voltage at which the varistor limits"),
      voltageTransformer: z.enum(["busSide", "lineSide"]).default("busSide"),
    })
    .optional(),
  terminals: z.array(terminal).min(2),
  towers: z.union([z.array(tower), evenTowers]).default([]),
});

export const networkSchema = z.strictObject({
  name: z.string().min(1),
  frequencyHz: z.union([z.literal(50), z.literal(60)]),
  phaseNames: z.tuple([z.string(), z.string(), z.string()]).default(["A", "B", "C"]),
  timeZone: z.string().default("Etc/UTC").describe("IANA name of the control room's zone"),
  patrolCaution: z.string().min(1).optional().describe("The utility's own sentence on keeping distance, shown to patrols"),
  stations: z
    .array(
      z.strictObject({
        id,
        name: z.string().min(1),
        latitude: z.number().min(-90).max(90).optional(),
        longitude: z.number().min(-180).max(180).optional(),
      }),
    )
    .min(1),
  feeds: z
    .array(
      z.strictObject({
        id,
        address: z
          .string()
          .refine((text) => parseAddress(text) !== undefined, "an address such as tcp://10.1.2.3:4712")
          .describe("tcp://host:port"),
        idCode: z.int().min(1).max(65534),
        class: z.enum(["P", "M"]),
        reportingRateHz: positive.max(240),
      }),
    )
    .default([]),
  lines: z.array(line).min(1),
  channels: z.array(z.looseObject({ id, kind: z.string().min(1) })).default([]),
});

export type NetworkFile = z.output<typeof networkSchema>;

/** JSON Schema (2020-12) of the network file, for editors. */
export const networkJsonSchema = (): unknown => z.toJSONSchema(networkSchema, { io: "input" });
