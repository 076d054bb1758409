/** What is wrong in a network file, each with its place. */

export type ConfigProblemCode = "unreadable" | "syntax" | "shape" | "unknown-name" | "duplicate-name" | "inconsistent";

export interface ConfigProblem {
  readonly code: ConfigProblemCode;
  readonly file: string;
  /** From 1; 0 when the file could not be read at all. */
  readonly line: number;
  readonly column: number;
  readonly expected: string;
  readonly found: string;
  readonly whatToDo?: string;
}

const problemText = (p: ConfigProblem): string =>
  `${p.file}${p.line > 0 ? `:${p.line}:${p.column}` : ""}: expected ${p.expected}, found ${p.found}${p.whatToDo ? `. ${p.whatToDo}` : ""}`;

/** The network file is refused; `problems` holds everything that was found wrong, in the order of the file. */
export class ConfigError extends Error {
  readonly problems: readonly ConfigProblem[];
  constructor(problems: readonly ConfigProblem[], cause?: unknown) {
    super(problems.map(problemText).join("\n"), cause === undefined ? undefined : { cause });
    this.name = "ConfigError";
    this.problems = problems;
  }
}
