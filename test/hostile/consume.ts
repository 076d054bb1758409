/** Everything that bytes from a line can reach in the codec. */
import { commandExtension, decodeCommand, decodeHeader, Framer, statWord, timeQualityOf, typeOf } from "../../ingest/index.ts";
import { StreamReader } from "../../ingest/stream-reader.ts";

export const ID_CODE = 241;

export interface Consumer {
  /** Rows, defects and frames so far; every byte ends in one of them or waits for more. */
  readonly rows: number;
  readonly reader: StreamReader;
  feed(bytes: Uint8Array): void;
}

export function consumer(): Consumer {
  const framer = new Framer({
    frame(bytes, at, size) {
      const type = typeOf(bytes[at + 1]!);
      if (type === "command" && size >= 18) {
        decodeCommand(bytes, at);
        commandExtension(bytes, at, size);
      } else if (type === "header") decodeHeader(bytes, at, size);
      else if (type === "data" && size >= 18) statWord.read((bytes[at + 14]! << 8) | bytes[at + 15]!);
      timeQualityOf(bytes[at + 10]!);
    },
    defect() {},
  });
  const state = {
    rows: 0,
    reader: new StreamReader({ id: "hostile", idCode: ID_CODE, address: "tcp://127.0.0.1:1", reportingRateHz: 60 } as never, {
      onConfiguration() {},
      onRow() {
        state.rows++;
      },
      onDefect() {},
    }),
    feed(bytes: Uint8Array) {
      framer.push(bytes);
      framer.end();
      state.reader.push(bytes);
      if (state.reader.isHopeless) state.reader.end();
    },
  };
  return state;
}
