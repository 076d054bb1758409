export { bindTerminal, type StreamColumn } from "./bind-terminal.ts";
export { ConfigError, type ConfigProblem, configProblemCodes, problemText } from "./errors.ts";
export { demoNetworkPath, loadNetwork, parseNetwork } from "./load.ts";
export * from "./model.ts";
export { networkJsonSchema } from "./schema.ts";
