export { parseAddress } from "./address.ts";
export { bindTerminal } from "./bind-terminal.ts";
export { ConfigError, type ConfigProblem } from "./errors.ts";
export { demoNetworkPath, loadNetwork, parseNetwork } from "./load.ts";
export * from "./model.ts";
export { networkJsonSchema } from "./schema.ts";
