/** Times as people read them: UTC first, then local with its offset. */

const pad = (n: number, width = 2) => String(n).padStart(width, "0");

/** "02:14:07 UTC" */
function utcTime(us: number): string {
  const d = new Date(us / 1000);
  return `${pad(d.getUTCHours())}:${pad(d.getUTCMinutes())}:${pad(d.getUTCSeconds())} UTC`;
}

/** Minutes that the zone is ahead of UTC at that time. */
export function offsetMinutes(us: number, timeZone: string): number {
  const name =
    new Intl.DateTimeFormat("en", { timeZone, timeZoneName: "longOffset" })
      .formatToParts(us / 1000)
      .find((p) => p.type === "timeZoneName")?.value ?? "GMT";
  const m = /GMT([+-])(\d{2}):(\d{2})/.exec(name);
  return m ? (m[1] === "-" ? -1 : 1) * (Number(m[2]) * 60 + Number(m[3])) : 0;
}

/** "03:14 +01:00" */
function localTime(us: number, timeZone: string): string {
  const offset = offsetMinutes(us, timeZone);
  const d = new Date(us / 1000 + offset * 60_000);
  const size = Math.abs(offset);
  return `${pad(d.getUTCHours())}:${pad(d.getUTCMinutes())} ${offset < 0 ? "-" : "+"}${pad(Math.floor(size / 60))}:${pad(size % 60)}`;
}

/** "02:14:07 UTC (03:14 +01:00)" */
export const bothTimes = (us: number, timeZone: string): string => `${utcTime(us)} (${localTime(us, timeZone)})`;
