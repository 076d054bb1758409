export { ChannelError } from "./delivery/channels.ts";
export { foldEvents } from "./fold-events.ts";
export { type Alerts, openAlerts } from "./open-alerts.ts";
export { StoreError } from "./store/sqlite-store.ts";
export { WatchServerError } from "./watch/watch-server.ts";
