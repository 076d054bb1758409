/** The accuracy table as a picture: for each situation a bar from the median to the 90th percentile, ours and the textbook's, and the bar that was set. */
export interface PictureRow {
  readonly situation: string;
  readonly medianPercent: number;
  readonly p90Percent: number;
  readonly textbookMedianPercent: number;
  readonly textbookP90Percent: number;
  readonly barPercent: readonly [number, number];
}

const LEFT = 230;
const WIDTH = 640;
const ROW = 64;
/** Logarithmic, 0.01 to 30 % of the line. */
const x = (percent: number) => LEFT + (WIDTH * Math.log10(Math.min(30, Math.max(0.01, percent)) / 0.01)) / Math.log10(3000);

export function accuracyPicture(rows: readonly PictureRow[], caption: string): string {
  const height = 70 + rows.length * ROW + 80;
  const parts = [
    `<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 ${LEFT + WIDTH + 40} ${height}" font-family="sans-serif" font-size="15" fill="#22262a">`,
    `<rect width="100%" height="100%" fill="#fbfaf6"/>`,
    `<text x="20" y="28" font-size="17" font-weight="bold">Error of the place, % of the line: median to 90th percentile</text>`,
  ];
  for (const tick of [0.01, 0.03, 0.1, 0.3, 1, 3, 10, 30]) {
    parts.push(
      `<path d="M${x(tick)} 50 V${height - 80}" stroke="#c9c5b8"/><text x="${x(tick)}" y="${height - 62}" text-anchor="middle">${tick}</text>`,
    );
  }
  rows.forEach((row, k) => {
    const y = 66 + k * ROW;
    const bar = (low: number, high: number, at: number, fill: string) =>
      `<rect x="${x(low)}" y="${at}" width="${Math.max(3, x(high) - x(low))}" height="13" fill="${fill}"/>`;
    parts.push(
      `<text x="20" y="${y + 22}">${row.situation}</text>`,
      bar(row.medianPercent, row.p90Percent, y, "#1e4f8a"),
      bar(row.textbookMedianPercent, row.textbookP90Percent, y + 19, "#a9aaa4"),
      ...row.barPercent.map((b) => `<path d="M${x(b)} ${y - 5} v23" stroke="#b3470f" stroke-width="3"/>`),
    );
  });
  parts.push(
    `<text x="20" y="${height - 36}" font-size="14"><tspan fill="#1e4f8a">■</tspan> this program  <tspan fill="#77797a">■</tspan> textbook method on the mid-fault frame  <tspan fill="#b3470f">┃</tspan> the bars set (median, 90th percentile)</text>`,
    `<text x="20" y="${height - 14}" font-size="14">${caption}</text>`,
    "</svg>",
  );
  return `${parts.join("\n")}\n`;
}
