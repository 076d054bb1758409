import { mkdtempSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { PassThrough } from "node:stream";
import { afterAll, describe, expect, it } from "vitest";
import type { Delivery } from "../../alerts/delivery/channel.ts";
import { makeChannels } from "../../alerts/delivery/channels.ts";
import { ChannelError, foldEvents } from "../../alerts/index.ts";
import { network, wholeStory } from "./samples.ts";

const folder = mkdtempSync(join(tmpdir(), "spanmark-channels-"));
afterAll(() => rmSync(folder, { recursive: true }));
const delivery: Delivery = {
  key: "K7M3/1/x",
  atUs: 5,
  message: { head: "Located", isAlarm: true, lines: ["first line", "second line"] },
  report: foldEvents(wholeStory, network)[0]!,
};

describe("channels", () => {
  it("terminal: plain lines where there is no terminal, weight where there is", async () => {
    const plain = new PassThrough();
    await makeChannels([{ id: "t", kind: "terminal" }], { dataFolder: folder, terminal: plain })[0]!.deliver(delivery);
    expect(String(plain.read())).toBe("Located          first line\n                 second line\n");
    const tty = Object.assign(new PassThrough(), { isTTY: true });
    const before = process.env.NO_COLOR;
    delete process.env.NO_COLOR;
    await makeChannels([{ id: "t", kind: "terminal" }], { dataFolder: folder, terminal: tty })[0]!.deliver(delivery);
    expect(String(tty.read())).toContain("\u001b[");
    process.env.NO_COLOR = "1";
    await makeChannels([{ id: "t", kind: "terminal" }], { dataFolder: folder, terminal: tty })[0]!.deliver(delivery);
    expect(String(tty.read())).not.toContain("\u001b[");
    if (before === undefined) delete process.env.NO_COLOR;
    else process.env.NO_COLOR = before;
  });

  it("terminal is left out when the output is for a program", () => {
    expect(makeChannels([{ id: "t", kind: "terminal" }], { dataFolder: folder, terminal: undefined })).toEqual([]);
  });

  it("JSON lines: one object a line, with its key, appended", async () => {
    const [channel] = makeChannels([{ id: "j", kind: "json-lines", path: "deep/incidents.jsonl" }], {
      dataFolder: folder,
      terminal: undefined,
    });
    await channel!.deliver(delivery);
    await channel!.deliver({ ...delivery, key: "K7M3/2/x" });
    const lines = readFileSync(join(folder, "deep/incidents.jsonl"), "utf8")
      .trim()
      .split("\n")
      .map((l) => JSON.parse(l));
    expect(lines.map((l) => l.key)).toEqual(["K7M3/1/x", "K7M3/2/x"]);
    expect(lines[0]).toMatchObject({ line: "brack-tolva", km: 41.27, stage: "settled" });
  });

  it("refuse an unknown kind, and settings that do not fit, naming the channel", () => {
    const make = (config: { id: string; kind: string; [k: string]: unknown }) => () =>
      makeChannels([config], { dataFolder: folder, terminal: undefined });
    expect(make({ id: "p", kind: "pigeon" })).toThrow(ChannelError);
    expect(make({ id: "p", kind: "pigeon" })).toThrow('channel "p": no kind "pigeon"; there are terminal, json-lines');
    expect(make({ id: "j", kind: "json-lines" })).toThrow(/channel "j" \(json-lines\):[\s\S]*path/);
    expect(make({ id: "j", kind: "json-lines", path: "x", colour: 1 })).toThrow(/colour/);
  });
});
