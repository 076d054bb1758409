export * from "./c37118/index.ts";
export { type OpenFeeds, openFeeds } from "./open-feeds.ts";
export { IncidentKeeper } from "./recording/keep-incidents.ts";
export { Recorder } from "./recording/recorder.ts";
export { RecordingError, recordingErrorCodes } from "./recording-error.ts";
export { RecordingWriter, recordingName } from "./recording-writer.ts";
export { replayRecordings } from "./replay.ts";
