export { checkedScenario, namedScenario, type Scenario, ScenarioError, scenarioNames } from "./scenario.ts";
export { type ServeOptions, serveNetwork } from "./serve-network.ts";
export type { Truth } from "./truth.ts";
export { writeScenario } from "./write-scenario.ts";
