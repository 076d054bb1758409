/** One JSON object a line, appended to a file: a record that any program can follow. */
import { appendFile, mkdir } from "node:fs/promises";
import { dirname, isAbsolute, join } from "node:path";
import { z } from "zod";
import type { Channel } from "./channel.ts";

export const jsonLinesSettings = z.strictObject({
  id: z.string(),
  kind: z.literal("json-lines"),
  path: z.string().min(1).describe("File to append to; relative to the data folder"),
});

export function jsonLinesChannel({ id, path }: z.output<typeof jsonLinesSettings>, dataFolder: string): Channel {
  const file = isAbsolute(path) ? path : join(dataFolder, path);
  return {
    id,
    async deliver({ key, message, report, atUs }) {
      await mkdir(dirname(file), { recursive: true });
      await appendFile(file, `${JSON.stringify({ key, atUs, head: message.head, ...report })}\n`);
    },
  };
}
