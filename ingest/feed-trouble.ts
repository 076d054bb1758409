/** Why a feed is not live, or works less well: listed codes, each with its words for an operator. */
export const feedTroubles = [
  "bad-address",
  "unreachable",
  "no-answer",
  "no-configuration",
  "not-synchrophasor",
  "closed",
  "silent",
  "wrong-id-code",
  "unknown-channel",
  "unlike-rate",
] as const;
export type FeedTrouble = (typeof feedTroubles)[number];
