/** The built program as processes of its own, as a user starts it; every process that a test starts is ended by it. */
import { type ChildProcess, spawn } from "node:child_process";
import { existsSync } from "node:fs";
import { createInterface } from "node:readline";
import { fileURLToPath } from "node:url";

const program = fileURLToPath(new URL("../../dist/spanmark.js", import.meta.url));
if (!existsSync(program)) throw new Error("dist/spanmark.js is missing: run `npm run build` first (`npm test` does)");

export interface Running {
  readonly child: ChildProcess;
  readonly lines: string[];
  readonly errors: string[];
  /** Resolves with the first line, old or new, that `pick` maps to something. */
  until<T>(pick: (line: string) => T | undefined, what: string): Promise<T>;
  readonly ended: Promise<number | null>;
}

export function run(...args: readonly string[]): Running {
  const child = spawn(process.execPath, [program, ...args], {
    stdio: ["ignore", "pipe", "pipe"],
    env: { ...process.env, NO_COLOR: "1" },
  });
  const lines: string[] = [];
  const errors: string[] = [];
  const waiting = new Set<(line: string) => void>();
  createInterface(child.stdout).on("line", (line) => {
    lines.push(line);
    for (const look of [...waiting]) look(line);
  });
  createInterface(child.stderr).on("line", (line) => errors.push(line));
  const ended = new Promise<number | null>((done) => child.once("close", (code) => done(code)));
  return {
    child,
    lines,
    errors,
    ended,
    until(pick, what) {
      return new Promise((done, fail) => {
        const look = (line: string) => {
          const found = pick(line);
          if (found === undefined) return;
          waiting.delete(look);
          done(found);
        };
        waiting.add(look);
        for (const line of [...lines]) look(line);
        void ended.then((code) => fail(new Error(`ended with exit ${code} before ${what}\n${errors.join("\n")}`)));
      });
    },
  };
}

/** Parses a line as JSON and hands on what `pick` makes of it. */
export const json =
  <T>(pick: (object: Record<string, unknown>) => T | undefined) =>
  (line: string): T | undefined => {
    try {
      return pick(JSON.parse(line));
    } catch {
      return undefined;
    }
  };
