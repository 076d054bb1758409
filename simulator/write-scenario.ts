/** A scenario as raw recordings, faster than real time, with its truth beside them. */
import { mkdirSync, writeFileSync } from "node:fs";
import { join } from "node:path";
import type { Network } from "../config/index.ts";
import { encodeConfig, encodeData, RecordingWriter, recordingName } from "../ingest/index.ts";
import { LineCourse, MeasuredEnd } from "./course.ts";
import type { Scenario } from "./scenario.ts";
import { sourcesOf } from "./sources.ts";
import { type Truth, truthOf } from "./truth.ts";

/** @returns the truth (undefined when nothing happens), and each feed's recording */
export async function writeScenario(
  network: Network,
  scenario: Scenario,
  folder: string,
): Promise<{ truth: Truth | undefined; recordings: ReadonlyMap<string, string> }> {
  mkdirSync(folder, { recursive: true });
  const startUs = scenario.startS * 1e6;
  let truth: Truth | undefined;
  const recordings = new Map<string, string>();
  const writers: RecordingWriter[] = [];
  for (const [n, line] of network.lines.entries()) {
    const course = new LineCourse(line, network.frequencyHz, sourcesOf(line));
    const { fault } = scenario;
    if (fault && line.id === scenario.line) {
      const atUs = startUs + fault.atS * 1e6;
      const never = [Number.POSITIVE_INFINITY, Number.POSITIVE_INFINITY] as const;
      truth = truthOf(line, fault, atUs, course.plan(atUs, fault, fault.openAfterS, never));
    }
    for (const terminal of line.terminals) {
      if (!terminal.measured) continue;
      const end = new MeasuredEnd(network, course, terminal, {
        ...scenario,
        seed: scenario.seed * 1000 + 10 * n + terminal.index,
      });
      const writer = new RecordingWriter(folder, end.feedId);
      writers.push(writer);
      const put = (frame: Buffer) => writer.write(frame, 0, frame.length);
      put(encodeConfig(end.config, "configuration-2", startUs));
      for (let slot = Math.ceil(startUs / end.periodUs); slot * end.periodUs < startUs + scenario.durationS * 1e6; slot++) {
        const timeUs = Math.round(slot * end.periodUs);
        put(encodeData(end.config, timeUs, [{ stat: 0, ...end.measure(timeUs) }]));
      }
      recordings.set(end.feedId, join(folder, recordingName(end.feedId)));
    }
  }
  await Promise.all(writers.map((writer) => writer.close()));
  writeFileSync(join(folder, "truth.json"), `${JSON.stringify({ scenario, truth: truth ?? null }, null, 2)}\n`);
  return { truth, recordings };
}
