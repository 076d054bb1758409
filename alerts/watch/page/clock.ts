/** Times as the page shows them: UTC first, then the control room's. */
const pad = (n: number) => String(n).padStart(2, "0");
const hms = (d: Date) => `${pad(d.getUTCHours())}:${pad(d.getUTCMinutes())}:${pad(d.getUTCSeconds())}`;

export const utc = (ms: number): string => `${hms(new Date(ms))} UTC`;

export function local(ms: number, offsetMinutes: number): string {
  const size = Math.abs(offsetMinutes);
  return `${hms(new Date(ms + offsetMinutes * 60_000))} ${offsetMinutes < 0 ? "-" : "+"}${pad(Math.floor(size / 60))}:${pad(size % 60)}`;
}

export const day = (ms: number): string => new Date(ms).toISOString().slice(0, 10);
