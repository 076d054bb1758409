export { captureFrames } from "./capture-frames.ts";
export { isCapture } from "./packets.ts";
