/**
 * A line drawn as a loaded wire: straight between its posts in quiet; a located fault hangs weights on it, and it takes the shape of the joint density.
 * Numbers are read from the bracket above the wire, never from the depth. Row and incident drawing differ in size, never in what they say.
 */
import type { Location } from "../../../pipeline/types.ts";
import type { WatchedIncident, WatchedLine } from "../protocol.ts";

export interface WireProps {
  readonly line: WatchedLine;
  /** Newest fault on this line that still needs showing. */
  readonly incident?: WatchedIncident | undefined;
  /** Per end: whether it can see now. */
  readonly sees: readonly boolean[];
  readonly size: "row" | "incident";
}

const WIDTH = 1000;
const POST = 26;
const SIZES = {
  row: { height: 44, top: 15, depth: 20, leastShare: 1 / 3 },
  incident: { height: 250, top: 78, depth: 120, leastShare: 0 },
} as const;

export function Wire({ line, incident, sees, size }: WireProps) {
  const { height, top, depth } = SIZES[size];
  const location = incident?.location ?? undefined;
  const x = (km: number) => POST + (km / line.lengthKm) * (WIDTH - 2 * POST);
  const isUnknown = incident !== undefined && incident.stage !== "outside" && (location === undefined || location.km === null);
  return (
    <svg
      class={`wire wire-${size}`}
      viewBox={`0 0 ${WIDTH} ${height}`}
      role="img"
      aria-label={describe(line, incident, sees)}
      preserveAspectRatio="none"
    >
      <Posts height={height} top={top} sees={sees} size={size} />
      {isUnknown ? (
        <path
          class="strand hangs"
          d={`M${POST} ${top} L${POST + 30} ${top + depth * 0.7} L${WIDTH - POST - 30} ${top + depth * 0.7} L${WIDTH - POST} ${top}`}
        />
      ) : location ? (
        <Loaded line={line} location={location} size={size} x={x} />
      ) : (
        <Straight line={line} sees={sees} top={top} x={x} />
      )}
    </svg>
  );
}

/** Per cent of the drawing's width at which a place lies, held away from the edges so that a label stays inside. */
export const placeOnWire = (km: number, lengthKm: number): number =>
  Math.min(90, Math.max(10, (100 * (POST + (km / lengthKm) * (WIDTH - 2 * POST))) / WIDTH));

/** In words what the drawing shows: its twin for those who do not see it. */
function describe(line: WatchedLine, incident: WatchedIncident | undefined, sees: readonly boolean[]): string {
  const blind = line.ends.filter((_, e) => !sees[e]).map((end) => end.stationName);
  const seen = blind.length === 0 ? "both ends see" : `cannot see from ${blind.join(" and ")}`;
  return incident ? `${incident.text}; ${seen}` : `${line.name}: nothing noticed; ${seen}`;
}

function Posts({ height, top, sees, size }: { height: number; top: number; sees: readonly boolean[]; size: "row" | "incident" }) {
  const foot = size === "row" ? height - 3 : height - 60;
  return (
    <>
      {[POST, WIDTH - POST].map((at, e) => (
        <path
          key={at}
          class={`post ${sees[e] ? "" : "broken"}`}
          d={
            sees[e]
              ? `M${at} ${top - 7} V${foot}`
              : `M${at} ${top - 7} V${top + (foot - top) * 0.3} M${at} ${top + (foot - top) * 0.6} V${foot}`
          }
        />
      ))}
    </>
  );
}

/** Quiet: solid where an end sees, dotted in the half next to an end that cannot. */
function Straight({
  line,
  sees,
  top,
  x,
}: {
  line: WatchedLine;
  sees: readonly boolean[];
  top: number;
  x: (km: number) => number;
}) {
  const middle = line.lengthKm / 2;
  const halves = [
    [0, middle, sees[0]],
    [middle, line.lengthKm, sees[1]],
  ] as const;
  return (
    <>
      {halves.map(([from, to, isSeen]) => (
        <path key={from} class={`strand ${isSeen ? "" : "unseen"}`} d={`M${x(from)} ${top} H${x(to)}`} />
      ))}
    </>
  );
}

function Loaded({
  line,
  location,
  size,
  x,
}: {
  line: WatchedLine;
  location: Location;
  size: "row" | "incident";
  x: (km: number) => number;
}) {
  const { top, depth, leastShare } = SIZES[size];
  const { stepKm, perKm } = location.density;
  // Full depth when all chance lies in one tower span; the square root keeps a rough place visible.
  const fullPerKm = 1 / (line.spanKm > 0 ? line.spanKm : 0.35);
  const peak = Math.sqrt(Math.min(1, Math.max(...perKm) / fullPerKm));
  const stretch = peak > 0 && peak < leastShare ? leastShare / peak : 1;
  const y = (p: number) => top + depth * Math.min(1, Math.sqrt(p / fullPerKm) * stretch);
  // Neighbouring steps that draw on the same pixel are one: the deepest.
  const points: string[] = [`M${x(0)} ${top}`];
  const group = Math.max(1, Math.floor(perKm.length / (WIDTH - 2 * POST)));
  for (let k = 0; k < perKm.length; k += group)
    points.push(`L${x((k + group / 2) * stepKm).toFixed(1)} ${y(Math.max(...perKm.slice(k, k + group))).toFixed(1)}`);
  points.push(`L${x(line.lengthKm)} ${top}`);
  const deepest = y(Math.max(...perKm));
  return (
    <>
      {size === "incident" && <TowerTicks line={line} top={top} x={x} />}
      <path class="strand loaded" d={points.join(" ")} />
      {location.pieces.map((piece, k) => (
        <g key={piece.lowKm} class={`bracket ${k === 0 ? "likelier" : ""}`}>
          <path d={`M${x(piece.lowKm)} ${top - 4} V${top - 11} H${Math.max(x(piece.highKm), x(piece.lowKm) + 3)} V${top - 4}`} />
        </g>
      ))}
      {hooks(location, size === "row").map((hook) => (
        <g key={hook.km} class={`weight ${location.flag === "rough" ? "hollow" : ""}`}>
          {size === "incident" && <path class="hook" d={`M${x(hook.km)} ${deepest} V${deepest + 16}`} />}
          <path class="body" d={weightPath(x(hook.km), size === "row" ? deepest - 1 : deepest + 16, hook.share, size)} />
        </g>
      ))}
    </>
  );
}

/** Methods that rest on the same frames hang from one hook. In a row there is one weight, at the place. */
function hooks(location: Location, isRow: boolean): { km: number; share: number }[] {
  if (isRow || location.km === null) return location.km === null ? [] : [{ km: location.km, share: 1 }];
  const byWitness = new Map<string, { km: number; share: number }>();
  for (const e of location.estimates) {
    if (e.weight <= 0.01) continue;
    const before = byWitness.get(e.witness) ?? { km: 0, share: 0 };
    byWitness.set(e.witness, { km: before.km + e.weight * e.km, share: before.share + e.weight });
  }
  return [...byWitness.values()].map(({ km, share }) => ({ km: km / share, share }));
}

/** A trapezium, wider below: heavier the more it counts. */
function weightPath(x: number, y: number, share: number, size: "row" | "incident"): string {
  const w = (size === "row" ? 5 : 5 + 8 * Math.sqrt(share)) as number;
  const h = size === "row" ? 8 : 8 + 12 * Math.sqrt(share);
  return `M${x - w * 0.6} ${y} H${x + w * 0.6} L${x + w} ${y + h} H${x - w} Z`;
}

/** One tick a tower, or every tenth when they would touch. */
function TowerTicks({ line, top, x }: { line: WatchedLine; top: number; x: (km: number) => number }) {
  if (line.spanKm <= 0) return null;
  const every = Math.max(1, Math.ceil(5 / (x(line.spanKm) - x(0))));
  const ticks: string[] = [];
  for (let k = 0; k * line.spanKm <= line.lengthKm; k += every) ticks.push(`M${x(k * line.spanKm).toFixed(1)} ${top - 2} v4`);
  return <path class="ticks" d={ticks.join(" ")} />;
}
