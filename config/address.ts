/** Where a feed is: `tcp://host:port`, the host a name, an IPv4 address, or an IPv6 address in brackets. */

export interface Address {
  readonly host: string;
  readonly port: number;
}

/** Undefined for what is no such address. */
export function parseAddress(text: string): Address | undefined {
  const parts = /^tcp:\/\/(?:\[([0-9a-fA-F:.]+)\]|([a-zA-Z0-9._-]+)):(\d{1,5})$/.exec(text);
  const host = parts?.[1] ?? parts?.[2];
  const port = Number(parts?.[3]);
  return host !== undefined && port >= 1 && port <= 65_535 ? { host, port } : undefined;
}
