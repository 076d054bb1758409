/** From the file's settings to the network: names looked up, constants of the whole line, towers with coordinates. */
import type { ConfigProblemCode } from "./errors.ts";
import type { Complex, Line, LineConstants, Network, Station, Terminal, Tower, TransformerClass } from "./model.ts";
import { nearestName } from "./nearest-name.ts";
import type { NetworkFile } from "./schema.ts";

type Report = (code: ConfigProblemCode, path: readonly PropertyKey[], expected: string, found: string, whatToDo?: string) => void;
type LineFile = NetworkFile["lines"][number];
type TerminalFile = LineFile["terminals"][number];

/** Limits of ratio error [%] and phase displacement [minutes] at rated value. Source: IEC 61869-2, table 201 (current) and IEC 61869-3, table 301 (voltage); from memory. */
const CURRENT_CLASS: Readonly<Record<string, TransformerClass>> = {
  "0.1": { ratioPercent: 0.1, angleMinutes: 5 },
  "0.2": { ratioPercent: 0.2, angleMinutes: 10 },
  "0.5": { ratioPercent: 0.5, angleMinutes: 30 },
  "1": { ratioPercent: 1, angleMinutes: 60 },
  "3": { ratioPercent: 3, angleMinutes: 180 }, // the standard sets no angle for class 3
};
const VOLTAGE_CLASS: Readonly<Record<string, TransformerClass>> = {
  "0.1": { ratioPercent: 0.1, angleMinutes: 5 },
  "0.2": { ratioPercent: 0.2, angleMinutes: 10 },
  "0.5": { ratioPercent: 0.5, angleMinutes: 20 },
  "1": { ratioPercent: 1, angleMinutes: 40 },
  "3": { ratioPercent: 3, angleMinutes: 120 }, // likewise
};

export function resolveNetwork(file: NetworkFile, report: Report): Network {
  for (const list of ["stations", "feeds", "lines", "channels"] as const) {
    const seen = new Set<string>();
    file[list].forEach((entry, k) => {
      if (seen.has(entry.id))
        report("duplicate-name", [list, k, "id"], `an id that no other of the ${list} has`, `"${entry.id}" again`);
      seen.add(entry.id);
    });
  }
  if (!isTimeZone(file.timeZone))
    report("unknown-name", ["timeZone"], 'an IANA zone such as "Europe/Lisbon" or "Etc/UTC"', `"${file.timeZone}"`);
  const lines = file.lines.map((line, k) => resolveLine(line, k, file, report));
  lines.forEach((line, k) => {
    const partner = line.parallel && lines.find((l) => l.id === line.parallel!.lineId);
    if (line.parallel && !partner)
      unknown(
        report,
        ["lines", k, "parallel", "line"],
        "a line",
        line.parallel.lineId,
        lines.map((l) => l.id),
      );
    else if (line.parallel && partner) {
      const { z0m } = line.parallel;
      const back = partner.parallel;
      const isMutual = back?.lineId === line.id && back.z0m.re === z0m.re && back.z0m.im === z0m.im;
      const expected = `the same coupling on both lines: parallel: { line: ${line.id}, z0m: [${z0m.re}, ${z0m.im}] } on ${partner.id}`;
      if (partner === line) report("inconsistent", ["lines", k, "parallel", "line"], "another line", `"${line.id}" itself`);
      else if (!isMutual)
        report(
          "inconsistent",
          ["lines", k, "parallel"],
          expected,
          back ? `parallel: { line: ${back.lineId}, z0m: [${back.z0m.re}, ${back.z0m.im}] } there` : "none there",
        );
    }
  });
  refuseSharedCurrents(lines, report);
  return {
    name: file.name,
    frequencyHz: file.frequencyHz,
    phaseNames: file.phaseNames,
    timeZone: file.timeZone,
    stations: file.stations.map(stationOf),
    feeds: file.feeds.map(({ class: pmuClass, ...feed }) => ({ ...feed, pmuClass })),
    lines,
    channels: file.channels,
    ...(file.patrolCaution ? { patrolCaution: file.patrolCaution } : {}),
  };
}

/** Two lines may share a voltage transformer on their bus; a current belongs to one of them. */
function refuseSharedCurrents(lines: readonly Line[], report: Report): void {
  const takenBy = new Map<string, string>();
  lines.forEach((line, k) => {
    for (const { id, index, measured } of line.terminals) {
      for (const role of ["IA", "IB", "IC"] as const) {
        if (!measured) continue;
        const channel = measured.channels[role];
        const key = JSON.stringify([measured.feedId, measured.unitIdCode, channel]);
        const other = takenBy.get(key);
        if (other !== undefined && other !== id) {
          report(
            "inconsistent",
            ["lines", k, "terminals", index],
            `a current of its own for ${role}`,
            `"${channel}" of feed ${measured.feedId}, unit ${measured.unitIdCode}, which is the current of ${other}`,
          );
          break;
        }
        takenBy.set(key, id);
      }
    }
  });
}

const stationOf = ({ id, name, latitude, longitude }: NetworkFile["stations"][number]): Station => ({
  id,
  name,
  ...(latitude === undefined || longitude === undefined ? {} : { latitude, longitude }),
});

function unknown(report: Report, path: readonly PropertyKey[], expected: string, found: string, known: readonly string[]): void {
  const guess = nearestName(found, known);
  report(
    "unknown-name",
    path,
    expected,
    `"${found}"`,
    guess ? `Did you mean ${guess}?` : `Known: ${known.join(", ") || "none"}.`,
  );
}

function resolveLine(line: LineFile, k: number, file: NetworkFile, report: Report): Line {
  const at = (...path: PropertyKey[]) => ["lines", k, ...path];
  if ((line.perKm === undefined) === (line.total === undefined)) {
    report("inconsistent", at(line.perKm ? "total" : "id"), "either perKm or total", line.perKm ? "both" : "neither");
  }
  const stations = line.terminals.map((t, e) => {
    const station = file.stations.find((s) => s.id === t.station);
    if (!station)
      unknown(
        report,
        at("terminals", e, "station"),
        "a station",
        t.station,
        file.stations.map((s) => s.id),
      );
    return station;
  });
  line.terminals.forEach((t, e) => {
    if (line.terminals.findIndex((other) => other.station === t.station) < e)
      report("duplicate-name", at("terminals", e, "station"), "each terminal at another station", `"${t.station}" again`);
  });
  if (line.seriesCapacitor && line.seriesCapacitor.atKm > line.lengthKm) {
    report(
      "inconsistent",
      at("seriesCapacitor", "atKm"),
      `at most the line's length ${line.lengthKm}`,
      String(line.seriesCapacitor.atKm),
    );
  }
  const { parallel, seriesCapacitor } = line;
  const complexOf = ([re, im]: readonly [number, number]): Complex => ({ re, im });
  return {
    id: line.id,
    name: line.name ?? stations.map((s) => s?.name ?? "?").join("-"),
    nominalKv: line.nominalKv,
    lengthKm: line.lengthKm,
    constants: constantsOf(line),
    terminals: line.terminals.map((t, e) => resolveTerminal(t, e, line, at("terminals", e), file, report)),
    ...(parallel ? { parallel: { lineId: parallel.line, z0m: complexOf(parallel.z0m) } } : {}),
    ...(seriesCapacitor
      ? {
          seriesCapacitor: {
            atKm: seriesCapacitor.atKm,
            reactanceOhm: seriesCapacitor.reactanceOhm,
            voltageTransformer: seriesCapacitor.voltageTransformer,
            ...(seriesCapacitor.varistorKv === undefined ? {} : { varistorKv: seriesCapacitor.varistorKv }),
          },
        }
      : {}),
    towers: towersOf(line, stations, (path, expected, found) => report("inconsistent", at(...path), expected, found)),
  };
}

function constantsOf(line: LineFile): LineConstants {
  const c = line.perKm ?? line.total ?? { r1Ohm: 0, x1Ohm: 1, r0Ohm: 0, x0Ohm: 1, b1MicroSiemens: 0, b0MicroSiemens: 0 };
  const n = line.perKm ? line.lengthKm : 1;
  return {
    z1: { re: c.r1Ohm * n, im: c.x1Ohm * n },
    z0: { re: c.r0Ohm * n, im: c.x0Ohm * n },
    b1: c.b1MicroSiemens * n * 1e-6,
    b0: c.b0MicroSiemens * n * 1e-6,
    z1Percent: line.uncertaintyPercent.z1,
    z0Percent: line.uncertaintyPercent.z0,
  };
}

function resolveTerminal(
  t: TerminalFile,
  index: number,
  line: LineFile,
  path: readonly PropertyKey[],
  file: NetworkFile,
  report: Report,
): Terminal {
  const feed = t.feed === undefined ? undefined : file.feeds.find((f) => f.id === t.feed);
  if (t.feed !== undefined && !feed)
    unknown(
      report,
      [...path, "feed"],
      "a feed",
      t.feed,
      file.feeds.map((f) => f.id),
    );
  const used = Object.values(t.channels);
  if (new Set(used).size < used.length)
    report("duplicate-name", [...path, "channels"], "six different channels", used.join(", "));
  const limits = (x: TerminalFile["currentTransformer"], classes: Readonly<Record<string, TransformerClass>>) =>
    "class" in x ? classes[x.class]! : x;
  const complexOf = (z: readonly [number, number] | undefined) => z && { re: z[0], im: z[1] };
  const [z1, z0] = [complexOf(t.sourceZ1), complexOf(t.sourceZ0)];
  return {
    id: `${line.id}/${t.station}`,
    lineId: line.id,
    stationId: t.station,
    index,
    source: t.source,
    ...(z1 ? { sourceZ1: z1 } : {}),
    ...(z0 ? { sourceZ0: z0 } : {}),
    ...(feed
      ? {
          measured: {
            feedId: feed.id,
            unitIdCode: t.unit ?? feed.idCode,
            channels: t.channels,
            currentSign: t.current === "intoLine" ? (1 as const) : (-1 as const),
            vtSide: t.vtSide,
            currentTransformer: limits(t.currentTransformer, CURRENT_CLASS),
            voltageTransformer: limits(t.voltageTransformer, VOLTAGE_CLASS),
          },
        }
      : {}),
  };
}

function towersOf(
  line: LineFile,
  stations: readonly (NetworkFile["stations"][number] | undefined)[],
  report: (path: PropertyKey[], expected: string, found: string) => void,
): Tower[] {
  if (!Array.isArray(line.towers)) {
    const { first, spanKm } = line.towers;
    const spans = Math.max(1, Math.round(line.lengthKm / spanKm));
    const [a, b] = [stations[0], stations.at(-1)];
    return Array.from({ length: spans + 1 }, (_, k) => {
      const share = k / spans;
      const place =
        a?.latitude !== undefined && a.longitude !== undefined && b?.latitude !== undefined && b.longitude !== undefined
          ? {
              latitude: a.latitude + share * (b.latitude - a.latitude),
              longitude: a.longitude + share * (b.longitude - a.longitude),
            }
          : {};
      return { number: String(first + k), km: share * line.lengthKm, ...place };
    });
  }
  line.towers.forEach((tower, k) => {
    const before = line.towers as { km: number }[];
    if (k > 0 && tower.km <= before[k - 1]!.km)
      report(["towers", k, "km"], `more than the tower before, ${before[k - 1]!.km}`, String(tower.km));
    if (tower.km > line.lengthKm + 0.5)
      report(["towers", k, "km"], `at most the line's length ${line.lengthKm}`, String(tower.km));
  });
  return line.towers.map(({ number, km, latitude, longitude }) => ({
    number,
    km,
    ...(latitude === undefined || longitude === undefined ? {} : { latitude, longitude }),
  }));
}

function isTimeZone(name: string): boolean {
  try {
    new Intl.DateTimeFormat("en", { timeZone: name });
    return true;
  } catch {
    return false;
  }
}
