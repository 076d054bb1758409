/** Processor time per frame against the number of feeds, ours and the bare drain's, as an SVG. */

interface Point {
  readonly feeds: number;
  readonly bare: { readonly cpuUsPerFrame: number };
  readonly ours: { readonly cpuUsPerFrame: number };
}

const [WIDTH, HEIGHT, LEFT, TOP, RIGHT, BOTTOM] = [720, 400, 70, 40, 150, 60];

export function growthPicture(points: readonly Point[]): string {
  const most = Math.max(...points.flatMap((p) => [p.bare.cpuUsPerFrame, p.ours.cpuUsPerFrame]));
  const step = 10 ** Math.floor(Math.log10(most));
  const top = Math.ceil(most / step) * step;
  const [first, last] = [Math.log10(points[0]!.feeds), Math.log10(points.at(-1)!.feeds)];
  const x = (feeds: number) => LEFT + ((Math.log10(feeds) - first) / (last - first || 1)) * (WIDTH - LEFT - RIGHT);
  const y = (us: number) => HEIGHT - BOTTOM - (us / top) * (HEIGHT - TOP - BOTTOM);
  const curve = (of: (p: Point) => number, colour: string, name: string) => `
  <polyline fill="none" stroke="${colour}" stroke-width="2" points="${points.map((p) => `${x(p.feeds).toFixed(1)},${y(of(p)).toFixed(1)}`).join(" ")}"/>
  ${points.map((p) => `<circle cx="${x(p.feeds).toFixed(1)}" cy="${y(of(p)).toFixed(1)}" r="3" fill="${colour}"/>`).join("")}
  <text x="${WIDTH - RIGHT + 10}" y="${(y(of(points.at(-1)!)) + 4).toFixed(1)}" fill="${colour}">${name}</text>`;
  const grid = Array.from({ length: Math.round(top / step) + 1 }, (_, k) => k * step);
  return `<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 ${WIDTH} ${HEIGHT}" font-family="sans-serif" font-size="13">
  <rect width="${WIDTH}" height="${HEIGHT}" fill="#fff"/>
  <text x="${LEFT}" y="22" font-size="15">Processor time per frame [µs], 60 frames/s a feed over TCP</text>
  ${grid.map((v) => `<path d="M${LEFT} ${y(v).toFixed(1)}H${WIDTH - RIGHT}" stroke="#ddd"/><text x="${LEFT - 8}" y="${(y(v) + 4).toFixed(1)}" text-anchor="end">${Number(v.toPrecision(3))}</text>`).join("\n  ")}
  ${points.map((p) => `<text x="${x(p.feeds).toFixed(1)}" y="${HEIGHT - BOTTOM + 20}" text-anchor="middle">${p.feeds}</text>`).join("")}
  <text x="${(LEFT + WIDTH - RIGHT) / 2}" y="${HEIGHT - 14}" text-anchor="middle">feeds</text>${curve((p) => p.ours.cpuUsPerFrame, "#0b5fa5", "into rings")}${curve((p) => p.bare.cpuUsPerFrame, "#8a5a00", "bare drain")}
</svg>
`;
}
