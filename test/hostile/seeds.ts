/** Good streams to damage: each frame type, each number format, both configurations. */
import { readdirSync, readFileSync } from "node:fs";
import { encodeCommand, encodeConfig, encodeConfig3, encodeData, encodeHeader, type StreamConfig } from "../../ingest/index.ts";
import { ID_CODE } from "./consume.ts";

const folder = new URL("corpus/", import.meta.url);
export const START_US = 1_772_590_440e6;

/** Committed inputs, each of which reached a branch that none before it did; see `grow-corpus.ts`. */
export const corpus = (): Buffer[] =>
  readdirSync(folder)
    .sort()
    .map((name) => readFileSync(new URL(name, folder)));

export function streamOfFormat(format: number): StreamConfig {
  const names = Array.from({ length: 16 }, (_, k) => `D${k}`);
  return {
    idCode: ID_CODE,
    timeBase: 1_000_000,
    reportingRateHz: [60, 50, 0.5][format % 3]!,
    units: [
      {
        name: "Brack",
        idCode: ID_CODE,
        phasorsArePolar: (format & 1) !== 0,
        phasorsAreFloat: (format & 2) !== 0,
        analogsAreFloat: (format & 4) !== 0,
        frequencyIsFloat: (format & 8) !== 0,
        phasors: [
          { name: "VA", kind: "voltage", perBit: 10 },
          { name: "IA", kind: "current", perBit: 0.5, angleRad: 0.5 },
        ],
        analogs: [{ name: "MW", kind: "rms", scale: 1 }],
        digitals: [{ names, normal: 0, valid: 0xffff }],
        nominalHz: 60,
        configurationCount: 1,
      },
    ],
  };
}

export const dataFrames = (config: StreamConfig, count: number, from = 0): Buffer[] =>
  Array.from({ length: count }, (_, k) =>
    encodeData(config, START_US + Math.round(((from + k) * 1e6) / config.reportingRateHz), [
      { stat: k, phasors: [1000, k, 5, -k], frequencyHz: 60, rocofHzPerS: 0, analogs: [1], digitals: [k] },
    ]),
  );

export function seeds(): Buffer[] {
  const streams = Array.from({ length: 16 }, (_, format) => {
    const config = streamOfFormat(format);
    const configuration = format % 2 ? encodeConfig3(config, START_US, 200) : [encodeConfig(config, "configuration-2", START_US)];
    return Buffer.concat([...configuration, ...dataFrames(config, 3)]);
  });
  const others = [
    encodeConfig(streamOfFormat(0), "configuration-1", START_US),
    encodeHeader(ID_CODE, "Brack, bay 7", START_US),
    encodeCommand(ID_CODE, "data-on", START_US),
    encodeCommand(ID_CODE, "extended", START_US, Buffer.from("c0ffee", "hex")),
  ];
  return [...streams, ...others];
}
