/** Reads a network file: YAML, then its shape, then what must fit together; every problem with line and column. */
import { existsSync, readFileSync } from "node:fs";
import { dirname, join } from "node:path";
import { fileURLToPath } from "node:url";
import { type Document, isMap, LineCounter, type Pair, parseDocument, type Scalar } from "yaml";
import type { z } from "zod";
import { ConfigError, type ConfigProblem, type ConfigProblemCode } from "./errors.ts";
import type { Network } from "./model.ts";
import { nearestName } from "./nearest-name.ts";
import { resolveNetwork } from "./resolve.ts";
import { networkSchema } from "./schema.ts";

/** @throws ConfigError with everything that is wrong */
export function loadNetwork(path: string): Network {
  let text: string;
  try {
    text = readFileSync(path, "utf8");
  } catch (cause) {
    const problem: ConfigProblem = {
      code: "unreadable",
      file: path,
      line: 0,
      column: 0,
      expected: "a readable network file",
      found: (cause as Error).message,
    };
    throw new ConfigError([problem], cause);
  }
  return parseNetwork(text, path);
}

/** The invented demo network that comes with the program; works from the sources and from the built folder. */
export function demoNetworkPath(): string {
  for (let folder = dirname(fileURLToPath(import.meta.url)); ; folder = dirname(folder)) {
    const path = join(folder, "config", "marrow-coast.yaml");
    if (existsSync(path)) return path;
    if (folder === dirname(folder)) throw new Error(`config/marrow-coast.yaml is not beside the program: install it again`);
  }
}

/** @throws ConfigError with everything that is wrong */
export function parseNetwork(text: string, file: string): Network {
  const lineCounter = new LineCounter();
  const doc = parseDocument(text, { lineCounter });
  const at = (offset: number) => {
    const { line, col } = lineCounter.linePos(offset);
    return { file, line, column: col };
  };
  const syntax = doc.errors.map(
    (error): ConfigProblem => ({
      code: "syntax",
      ...at(error.pos[0]),
      expected: "valid YAML",
      found: error.message.split("\n")[0]!.replace(/ at line \d+, column \d+:?$/, ""),
    }),
  );
  // One slip makes the rest unreadable: only the first says something.
  if (syntax.length > 0) throw new ConfigError(syntax.slice(0, 1));
  const placeOf = (path: readonly PropertyKey[]) => at(offsetOf(doc, path));
  const read = networkSchema.safeParse(doc.toJS(), { reportInput: true });
  if (!read.success) throw new ConfigError(read.error.issues.flatMap((issue) => problemsOf(issue, doc, placeOf, at)));
  const found: ConfigProblem[] = [];
  const report = (code: ConfigProblemCode, path: readonly PropertyKey[], expected: string, what: string, whatToDo?: string) =>
    found.push({ code, ...placeOf(path), expected, found: what, ...(whatToDo ? { whatToDo } : {}) });
  const network = resolveNetwork(read.data, report);
  if (found.length > 0) throw new ConfigError(found.sort((p, q) => p.line - q.line || p.column - q.column));
  return network;
}

type Place = { file: string; line: number; column: number };

/** Start of the node at `path`, or of the nearest one above it that is in the file. */
function offsetOf(doc: Document, path: readonly PropertyKey[]): number {
  for (let depth = path.length; depth >= 0; depth--) {
    const node = depth === 0 ? doc.contents : doc.getIn(path.slice(0, depth), true);
    const range = (node as { range?: [number, number, number] | null } | undefined)?.range;
    if (range) return range[0];
  }
  return 0;
}

function problemsOf(
  issue: z.core.$ZodIssue,
  doc: Document,
  placeOf: (path: readonly PropertyKey[]) => Place,
  at: (offset: number) => Place,
): ConfigProblem[] {
  const path = issue.path;
  if (issue.code === "unrecognized_keys") {
    const parent = path.length === 0 ? doc.contents : doc.getIn(path, true);
    const known = knownKeys(path);
    return issue.keys.map((key) => {
      const pair = isMap(parent) ? (parent.items as Pair<Scalar, unknown>[]).find((p) => String(p.key.value) === key) : undefined;
      const guess = nearestName(key, known);
      return {
        code: "shape",
        ...(pair?.key.range ? at(pair.key.range[0]) : placeOf(path)),
        expected: "a setting that is known here",
        found: `"${key}"`,
        ...(guess ? { whatToDo: `Did you mean ${guess}?` } : {}),
      };
    });
  }
  if (issue.code === "invalid_union") {
    const inner = issue.errors.flat();
    const deepest = inner.sort((p, q) => q.path.length - p.path.length)[0];
    if (deepest && deepest.path.length > 0)
      return problemsOf({ ...deepest, path: [...path, ...deepest.path] } as z.core.$ZodIssue, doc, placeOf, at);
  }
  const found = issue.input === undefined ? "nothing" : shown(issue.input);
  return [{ code: "shape", ...placeOf(path), expected: `${nameOf(path)}${wanted(issue)}`, found }];
}

/** What would have been right, from the library's own words. */
function wanted(issue: z.core.$ZodIssue): string {
  if (issue.code === "invalid_union") {
    const values = issue.errors.flat().flatMap((e) => (e.code === "invalid_value" ? e.values : []));
    if (values.length > 0) return values.map(String).join(" or ");
  }
  return issue.message
    .replace(/^(Invalid input|Too small|Too big|Invalid option): expected /, "")
    .replace(/, received .*$/, "")
    .replace(/^(number|string|array) to (be|have) /, "");
}

/** "lines[0].lengthKm: " for messages. */
const nameOf = (path: readonly PropertyKey[]): string =>
  path.length === 0 ? "" : `${path.map((p, k) => (typeof p === "number" ? `[${p}]` : `${k ? "." : ""}${String(p)}`)).join("")}: `;

const shown = (x: unknown): string =>
  typeof x === "object" && x !== null
    ? Array.isArray(x)
      ? `a list of ${x.length}`
      : `settings ${Object.keys(x).join(", ")}`
    : JSON.stringify(x);

/** Settings that the schema knows at a place, for guesses. */
function knownKeys(path: readonly PropertyKey[]): string[] {
  let schema: unknown = networkSchema;
  for (const step of path) {
    schema = unwrapped(schema);
    const s = schema as { shape?: Record<string, unknown>; element?: unknown };
    schema = typeof step === "number" ? s.element : s.shape?.[String(step)];
  }
  return Object.keys((unwrapped(schema) as { shape?: Record<string, unknown> } | undefined)?.shape ?? {});
}
function unwrapped(schema: unknown): unknown {
  let s = schema as { unwrap?: () => unknown; shape?: unknown; element?: unknown } | undefined;
  while (s && !s.shape && !s.element && typeof s.unwrap === "function") s = s.unwrap() as typeof s;
  return s;
}
