export { checkedScenario, namedScenario, ScenarioError, scenarioNames } from "./scenario.ts";
export { serveNetwork } from "./serve-network.ts";
export { writeScenario } from "./write-scenario.ts";
