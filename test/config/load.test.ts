import { readFileSync } from "node:fs";
import { describe, expect, it } from "vitest";
import {
  bindTerminal,
  ConfigError,
  type ConfigProblem,
  demoNetworkPath,
  loadNetwork,
  networkJsonSchema,
  parseAddress,
  parseNetwork,
} from "../../config/index.ts";

const text = readFileSync(demoNetworkPath(), "utf8");
const problemsOf = (from: string, to: string): readonly ConfigProblem[] => {
  expect(text).toContain(from);
  try {
    parseNetwork(text.replace(from, to), "net.yaml");
  } catch (error) {
    expect(error).toBeInstanceOf(ConfigError);
    return (error as ConfigError).problems;
  }
  return [];
};
const lineOf = (needle: string) => text.slice(0, text.indexOf(needle)).split("\n").length;

describe("the demo network", () => {
  const network = loadNetwork(demoNetworkPath());
  it("holds the Marrow Coast: six circuits, each measured end with its own unit", () => {
    expect(network.lines.map((l) => [l.name, l.nominalKv, l.lengthKm])).toEqual([
      ["Brack-Tolva", 230, 148.2],
      ["Tolva-Quenby 1", 230, 96.4],
      ["Tolva-Quenby 2", 230, 96.4],
      ["Quenby-Ister 1", 500, 312],
      ["Quenby-Ister 2", 500, 312],
      ["Ister-Nolde", 345, 205.5],
    ]);
    expect(network.lines.at(-1)!.terminals.map((t) => [t.source, t.measured?.feedId])).toEqual([
      ["synchronous", "ister-nolde-at-ister"],
      ["converter", undefined],
    ]);
  });
  it("turns constants per km into the whole line's, in base units", () => {
    const { z1, b1 } = network.lines[0]!.constants;
    expect(z1.re).toBeCloseTo(0.062 * 148.2, 9);
    expect(z1.im).toBeCloseTo(0.486 * 148.2, 9);
    expect(b1).toBeCloseTo(3.42e-6 * 148.2, 12);
  });
  it("gives each tower its distance and its place between the stations", () => {
    const { towers, lengthKm } = network.lines[0]!;
    expect(towers[0]).toMatchObject({ number: "1", km: 0, latitude: -46.1, longitude: -32.8 });
    expect(towers.at(-1)!.km).toBeCloseTo(lengthKm, 9);
    expect(towers.at(-1)!.longitude).toBeCloseTo(-31.1, 9);
    expect(towers[1]!.km).toBeCloseTo(0.35, 2);
  });
});

describe("a network file that is wrong is refused with its line and column", () => {
  it.each([
    ["station: brack", "station: brak", "unknown-name", "a station", '"brak"', "Did you mean brack?"],
    [
      "feed: ister-nolde-at-ister",
      "feed: ister-nolde-at-istre",
      "unknown-name",
      "a feed",
      '"ister-nolde-at-istre"',
      "Did you mean ister-nolde-at-ister?",
    ],
    ["lengthKm: 148.2", "lengthKm: -3", "shape", "lines[0].lengthKm: >0", "-3", undefined],
    ["frequencyHz: 60", "frequencyHz: 61", "shape", "frequencyHz: 50 or 60", "61", undefined],
    [
      'address: "tcp://127.0.0.1:4712"',
      'address: "http://x"',
      "shape",
      "feeds[0].address: an address such as tcp://10.1.2.3:4712",
      '"http://x"',
      undefined,
    ],
    [
      "timeZone: Etc/GMT-1",
      "timeZone: Mars",
      "unknown-name",
      'an IANA zone such as "Europe/Lisbon" or "Etc/UTC"',
      '"Mars"',
      undefined,
    ],
    [
      "id: tolva, name",
      "id: brack, name",
      "duplicate-name",
      "an id that no other of the stations has",
      '"brack" again',
      undefined,
    ],
    [
      "parallel: { line: tolva-quenby-2",
      "parallel: { line: tolva-quenby-3",
      "unknown-name",
      "a line",
      '"tolva-quenby-3"',
      "Did you mean tolva-quenby-1?",
    ],
    [
      "seriesCapacitor: { atKm: 0,",
      "seriesCapacitor: { atKm: 400,",
      "inconsistent",
      "at most the line's length 312",
      "400",
      undefined,
    ],
    [
      'address: "tcp://127.0.0.1:4713"',
      'address: "tcp://127.0.0.1:99999"',
      "shape",
      "feeds[1].address: an address such as tcp://10.1.2.3:4712",
      '"tcp://127.0.0.1:99999"',
      undefined,
    ],
    [
      "parallel: { line: tolva-quenby-2, z0m: [24.1, 79.0] }",
      "parallel: { line: tolva-quenby-2, z0m: [24.1, 97.0] }",
      "inconsistent",
      "the same coupling on both lines: parallel: { line: tolva-quenby-1, z0m: [24.1, 97] } on tolva-quenby-2",
      "parallel: { line: tolva-quenby-1, z0m: [24.1, 79] } there",
      undefined,
    ],
    [
      "parallel: { line: tolva-quenby-2,",
      "parallel: { line: brack-tolva,",
      "inconsistent",
      "the same coupling on both lines: parallel: { line: tolva-quenby-1, z0m: [24.1, 79] } on brack-tolva",
      "none there",
      undefined,
    ],
    [
      "parallel: { line: quenby-ister-2,",
      "parallel: { line: quenby-ister-1,",
      "inconsistent",
      "another line",
      '"quenby-ister-1" itself',
      undefined,
    ],
    [
      "- station: quenby\n        feed: quenby-ister-2-at-quenby",
      "- station: quenby\n        feed: quenby-ister-1-at-quenby",
      "inconsistent",
      "a current of its own for IA",
      '"IA" of feed quenby-ister-1-at-quenby, unit 107, which is the current of quenby-ister-1/quenby',
      undefined,
    ],
    [
      "station: quenby\n        feed: tolva-quenby-1-at-quenby",
      "station: tolva\n        feed: tolva-quenby-1-at-quenby",
      "duplicate-name",
      "each terminal at another station",
      '"tolva" again',
      undefined,
    ],
  ])("%s -> %s", (from, to, code, expected, found, whatToDo) => {
    const problem = problemsOf(from, to)[0]!;
    expect(problem).toMatchObject({ code, file: "net.yaml", expected, found, line: lineOf(from) });
    expect(problem.whatToDo).toBe(whatToDo);
    expect(problem.column).toBeGreaterThan(1);
  });

  it("an unknown setting is named with the one that was meant", () => {
    const problems = problemsOf("nominalKv: 345", "nominalVolt: 345");
    expect(problems.map((p) => [p.found, p.whatToDo])).toContainEqual(['"nominalVolt"', "Did you mean nominalKv?"]);
  });
  it("a line with neither, or both, kinds of constants", () => {
    const given = "    uncertaintyPercent: { z1: 1, z0: 5 }\n    terminals:\n      - station: brack\n";
    const total = "    total: { r1Ohm: 9.2, x1Ohm: 72, r0Ohm: 46, x0Ohm: 199 }\n";
    expect(problemsOf(given, total + given)).toEqual([
      {
        code: "inconsistent",
        file: "net.yaml",
        line: lineOf(given),
        column: 12,
        expected: "either perKm or total",
        found: "both",
      },
    ]);
    const perKm = text.slice(text.indexOf("    perKm:"), text.indexOf(given));
    expect(problemsOf(perKm, "")[0]).toMatchObject({ expected: "either perKm or total", found: "neither" });
    expect(parseNetwork(text.replace(perKm, total), "net.yaml").lines[0]!.constants).toMatchObject({
      z1: { re: 9.2, im: 72 },
      z0: { re: 46, im: 199 },
      b1: 0,
    });
  });
  it("one channel for two phases", () => {
    const channels = "feed: ister-nolde-at-ister\n        channels: { VA: UA, VB: UA }";
    expect(problemsOf("feed: ister-nolde-at-ister", channels)[0]).toMatchObject({
      code: "duplicate-name",
      expected: "six different channels",
    });
  });
  it("a slip in the YAML itself is told once, where it is", () => {
    const problems = problemsOf("lines:\n", "lines: [\n");
    expect(problems.length).toBe(1);
    expect(problems[0]).toMatchObject({ code: "syntax", line: lineOf("lines:\n") + 1 });
  });
  it("a file that is not there", () => {
    expect(() => loadNetwork("/nowhere/net.yaml")).toThrow(/\/nowhere\/net\.yaml: expected a readable network file/);
    try {
      loadNetwork("/nowhere/net.yaml");
    } catch (error) {
      expect((error as ConfigError).problems).toMatchObject([{ code: "unreadable", line: 0, column: 0 }]);
    }
  });
  it("everything that is wrong is told at once", () => {
    const both = text.replace("station: brack", "station: brak").replace("feed: ister-nolde-at-ister", "feed: nix");
    expect(() => parseNetwork(both, "net.yaml")).toThrow(/brak[\s\S]*nix/);
  });
});

it("towers given one by one must follow each other", () => {
  const generated = "towers: { first: 1, spanKm: 0.38 }";
  expect(problemsOf(generated, "towers: [{ number: 1, km: 0 }, { number: 2A, km: 3 }, { number: 3, km: 2 }]")[0]).toMatchObject({
    code: "inconsistent",
    expected: "more than the tower before, 3",
    found: "2",
  });
  const network = parseNetwork(
    text.replace(generated, "towers: [{ number: 1, km: 0 }, { number: 2A, km: 3, latitude: -50, longitude: -25 }]"),
    "net.yaml",
  );
  expect(network.lines.at(-1)!.towers).toEqual([
    { number: "1", km: 0 },
    { number: "2A", km: 3, latitude: -50, longitude: -25 },
  ]);
});

it("prints a JSON Schema with every setting's name", () => {
  const schema = JSON.stringify(networkJsonSchema());
  for (const name of ["reportingRateHz", "z0m", "spanKm", "currentTransformer", "patrolCaution"])
    expect(schema).toContain(`"${name}"`);
});

it("reads addresses by name, IPv4 and IPv6, and nothing else", () => {
  expect(parseAddress("tcp://unit-7.example:4712")).toEqual({ host: "unit-7.example", port: 4712 });
  expect(parseAddress("tcp://[::1]:65535")).toEqual({ host: "::1", port: 65_535 });
  for (const bad of ["tcp://a:0", "tcp://a:65536", "udp://a:1", "tcp://a", "tcp://a<b:1", "tcp://a:1/x", "a:1", ""])
    expect(parseAddress(bad), bad).toBeUndefined();
});

describe("binding a terminal to a stream", () => {
  const measured = loadNetwork(demoNetworkPath()).lines[0]!.terminals[0]!.measured!;
  const columns = ["IA", "IB", "IC", "VA", "VB", "VC"].map((name, indexInUnit) => ({
    unitIdCode: measured.unitIdCode,
    name,
    indexInUnit,
  }));
  it("finds channels by name, or by position in the unit", () => {
    expect(bindTerminal(columns, measured)).toEqual({ columns: [3, 4, 5, 0, 1, 2] });
    expect(
      bindTerminal([{ unitIdCode: 9, name: "VA", indexInUnit: 0 }, ...columns], {
        ...measured,
        channels: { VA: 3, VB: 4, VC: 5, IA: 0, IB: 1, IC: 2 },
      }),
    ).toEqual({
      columns: [4, 5, 6, 1, 2, 3],
    });
  });
  it("says what is missing and what there is", () => {
    expect(bindTerminal(columns, { ...measured, channels: { ...measured.channels, VB: "UB" } })).toEqual({
      problem: 'channel not in the stream of feed brack-tolva-at-brack: VB = "UB"; it holds "IA", "IB", "IC", "VA", "VB", "VC"',
    });
    expect(bindTerminal(columns, { ...measured, unitIdCode: 7 })).toEqual({
      problem: "unit 7 is not in the stream of feed brack-tolva-at-brack; it holds 101",
    });
  });
});
