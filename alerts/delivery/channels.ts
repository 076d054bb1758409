/** Makes the channels that a network file names. To add a kind: its file with a schema beside this one, and a line in `makers`. */
import { z } from "zod";
import type { ChannelConfig } from "../../config/index.ts";
import type { Channel } from "./channel.ts";
import { jsonLinesChannel, jsonLinesSettings } from "./json-lines-channel.ts";
import { terminalChannel, terminalSettings } from "./terminal-channel.ts";

export class ChannelError extends Error {}

export interface ChannelSurroundings {
  readonly dataFolder: string;
  /** Where terminal channels write; undefined leaves them out (the output is for a program). */
  readonly terminal: (NodeJS.WritableStream & { isTTY?: boolean }) | undefined;
}

type Maker = (config: ChannelConfig, around: ChannelSurroundings) => Channel | undefined;

const makers: Readonly<Record<string, Maker>> = {
  terminal: (config, { terminal }) => {
    terminalSettings.parse(config);
    return terminal && terminalChannel(config.id, terminal);
  },
  "json-lines": (config, { dataFolder }) => jsonLinesChannel(jsonLinesSettings.parse(config), dataFolder),
};

/** @throws ChannelError naming the channel, its kind and what is wrong with its settings */
export function makeChannels(configs: readonly ChannelConfig[], around: ChannelSurroundings): Channel[] {
  return configs.flatMap((config) => {
    const maker = makers[config.kind];
    if (!maker)
      throw new ChannelError(`channel "${config.id}": no kind "${config.kind}"; there are ${Object.keys(makers).join(", ")}`);
    try {
      return maker(config, around) ?? [];
    } catch (cause) {
      if (!(cause instanceof z.ZodError)) throw cause;
      throw new ChannelError(`channel "${config.id}" (${config.kind}): ${z.prettifyError(cause)}`, { cause });
    }
  });
}
