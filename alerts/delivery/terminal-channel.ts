/** Plain lines on a terminal; colour only where the terminal has it, and never alone. */
import pc from "picocolors";
import { z } from "zod";
import type { Channel } from "./channel.ts";

export const terminalSettings = z.strictObject({ id: z.string(), kind: z.literal("terminal") });

export function terminalChannel(id: string, out: NodeJS.WritableStream & { isTTY?: boolean }): Channel {
  const colours = pc.createColors(out.isTTY === true && !process.env.NO_COLOR);
  return {
    id,
    deliver({ message }) {
      const [first, ...rest] = message.lines;
      const head = message.head.padEnd(16);
      const text = [
        `${message.isAlarm ? colours.bold(colours.inverse(head)) : colours.bold(head)} ${first}`,
        ...rest.map((line) => `${" ".repeat(17)}${colours.dim(line)}`),
      ].join("\n");
      return new Promise((done, fail) => {
        out.write(`${text}\n`, (error) => (error ? fail(error) : done()));
      });
    },
  };
}
