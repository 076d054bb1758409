import { fileURLToPath } from "node:url";
import { describe, expect, it } from "vitest";
import { importsOf, permitted, readSource, sources, violation } from "./directions.ts";

const root = fileURLToPath(new URL("../..", import.meta.url));

describe("imports between folders", () => {
  it("go only in the direction data flows, and through the other folder's door", () => {
    const files = sources(root);
    const imports = files.flatMap((file) => importsOf(file, readSource(root, file)));
    for (const folder of Object.keys(permitted))
      expect(files.filter((f) => f.startsWith(`${folder}/`)).length, `sources seen in ${folder}/`).toBeGreaterThan(2);
    expect(imports.length, "a check that saw nothing passes").toBeGreaterThan(100);
    expect(imports.map(violation).filter((v) => v !== undefined)).toEqual([]);
  });

  it.each([
    ["simulator/a.ts", 'import { takagi } from "../pipeline/index.ts";', "simulator may not import pipeline"],
    ["pipeline/methods/a.ts", 'import { Framer } from "../../ingest/index.ts";', "pipeline may import only types of ingest"],
    ["pipeline/a.ts", 'export { openFeeds } from "../ingest/index.ts";', "pipeline may import only types of ingest"],
    ["alerts/a.ts", 'const x = await import("../pipeline/index.ts");', "alerts may import only types of pipeline"],
    ["ingest/a.ts", 'import { loadNetwork } from "../config/load.ts";', "go through config/index.ts"],
    ["config/a.ts", 'import type { FrameRing } from "../ingest/types.ts";', "config may not import ingest"],
  ])("a planted violation in %s is caught: %s", (file, text, message) => {
    expect(importsOf(file, text).map(violation).join()).toContain(message);
  });

  it.each([
    ["pipeline/a.ts", 'import type { FrameRing } from "../ingest/types.ts";'],
    ["pipeline/a.ts", 'import { type FrameRing, type FrameBlock } from "../ingest/types.ts";'],
    ["simulator/a.ts", 'import { encodeData } from "../ingest/index.ts";'],
    ["ingest/c37118/a.ts", 'import { x } from "./b.ts";'],
  ])("what is allowed passes: %s: %s", (file, text) => {
    const imports = importsOf(file, text);
    expect(imports.length).toBe(1);
    expect(imports.map(violation)).toEqual([undefined]);
  });
});
