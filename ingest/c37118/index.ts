export { crcCcitt } from "./checksum.ts";
export { type Command, decodeCommand, encodeCommand } from "./command-frame.ts";
export { type FrameType, frameTypes, statWord, timeUsOf, typeOf } from "./common-header.ts";
export { BadConfiguration, decodeConfig, encodeConfig } from "./config-frame.ts";
export { encodeData, type UnitData } from "./data-frame.ts";
export { type DataPlan, decodeRowInto, planOf } from "./data-plan.ts";
export { type FrameDefect, frameDefects } from "./defects.ts";
export { Framer } from "./framer.ts";
export { decodeHeader, encodeHeader } from "./header-frame.ts";
export {
  type AnalogChannel,
  type DigitalWord,
  dataFrameBytes,
  type PhasorChannel,
  type StreamConfig,
  type UnitConfig,
} from "./stream-config.ts";
