export * from "./c37118/index.ts";
export { type OpenFeeds, openFeeds } from "./open-feeds.ts";
export { RecordingWriter, recordingName } from "./recording-writer.ts";
export { RecordingError, recordingErrorCodes, replayRecordings } from "./replay.ts";
