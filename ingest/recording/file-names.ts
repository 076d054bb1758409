export const RECORDING_SUFFIX = ".frames";
export const INDEX_SUFFIX = ".index";

/** Tag of a rotating file's first data frame [µs since 1970 UTC], from its name; NaN for other names. */
export const startUsOf = (name: string): number =>
  /^\d{16}\.frames$/.test(name) ? Number(name.slice(0, -RECORDING_SUFFIX.length)) : Number.NaN;
