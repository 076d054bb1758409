/**
 * Which folder may import which, as data flows: the table of DEVELOPERS.md. `all` means values and types, `types` only `import type`.
 * Across folders an import goes through the other's `index.ts`, or `types.ts` for types.
 */
import { readdirSync, readFileSync } from "node:fs";
import { dirname, join, normalize, relative, sep } from "node:path";

type Permission = "all" | "types";
export const permitted: Readonly<Record<string, Readonly<Record<string, Permission>>>> = {
  config: {},
  ingest: { config: "all" },
  pipeline: { config: "all", ingest: "types" },
  alerts: { config: "all", ingest: "types", pipeline: "types" },
  simulator: { config: "all", ingest: "all" },
};

export interface Import {
  readonly from: string;
  readonly to: string;
  readonly isTypeOnly: boolean;
}

/** Relative imports and re-exports of one source text, also dynamic ones. */
export function importsOf(file: string, text: string): Import[] {
  const found: Import[] = [];
  const pattern =
    /(?:^|\n)\s*(import|export)\s+(type\s+)?([^"';]*?from\s*)?["'](\.[^"']+)["']|import\(\s*["'](\.[^"']+)["']\s*\)/g;
  for (const match of text.matchAll(pattern)) {
    const target = match[4] ?? match[5]!;
    const names = match[3] ?? "";
    const inner = /\{([^}]*)\}/.exec(names)?.[1];
    const everyNameIsType =
      (inner?.split(",").every((n) => n.trim() === "" || n.trim().startsWith("type ")) ?? false) &&
      !/^[^{]*\w[^{]*\{/.test(names);
    found.push({ from: file, to: normalize(join(dirname(file), target)), isTypeOnly: match[2] !== undefined || everyNameIsType });
  }
  return found;
}

/** What is wrong with an import, in words; undefined when it is allowed. */
export function violation({ from, to, isTypeOnly }: Import): string | undefined {
  const [folder, target] = [from.split(sep)[0]!, to.split(sep)[0]!];
  const rules = permitted[folder];
  if (!rules || folder === target || !(target in permitted)) return undefined;
  const permission = rules[target];
  if (!permission) return `${from} imports ${to}: ${folder} may not import ${target}`;
  if (permission === "types" && !isTypeOnly) return `${from} imports ${to}: ${folder} may import only types of ${target}`;
  if (to !== join(target, "index.ts") && to !== join(target, "types.ts"))
    return `${from} imports ${to}: go through ${target}/index.ts or ${target}/types.ts`;
  return undefined;
}

/** All TypeScript sources of the five stages, relative to the root. */
export function sources(root: string): string[] {
  return Object.keys(permitted).flatMap((folder) =>
    readdirSync(join(root, folder), { recursive: true, withFileTypes: true })
      .filter((entry) => entry.isFile() && /\.tsx?$/.test(entry.name))
      .map((entry) => relative(root, join(entry.parentPath ?? entry.path, entry.name))),
  );
}

export const readSource = (root: string, file: string): string => readFileSync(join(root, file), "utf8");
