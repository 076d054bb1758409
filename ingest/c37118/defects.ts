/** What can be wrong with bytes that come in. Each is counted per feed and shown; none is an exception. */
export const frameDefects = [
  "no-sync",
  "unknown-frame-type",
  "size-out-of-bounds",
  "bad-crc",
  "wrong-id-code",
  "bad-configuration",
  "size-unlike-configuration",
  "no-configuration-yet",
  "truncated",
  "time-out-of-bounds",
  "duplicate",
  "late",
  "leap-second",
] as const;
export type FrameDefect = (typeof frameDefects)[number];
