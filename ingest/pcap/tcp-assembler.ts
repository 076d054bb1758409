/** One direction of a captured TCP connection put in order: what came twice is left out, what came early waits, what never came is told as a gap. */

/** What may wait for an earlier segment; beyond it the segment was lost by the capture. */
const WAITING_BYTES = 1024 * 1024;
const WAITING_SEGMENTS = 1024;

export interface TcpSink {
  bytes(payload: Buffer): void;
  /** Bytes are missing here. */
  gap(): void;
}

export class TcpAssembler {
  readonly #sink: TcpSink;
  #next: number | undefined;
  /** By sequence number, unordered. */
  #waiting: { readonly sequence: number; readonly payload: Buffer }[] = [];
  #waitingBytes = 0;

  constructor(sink: TcpSink) {
    this.#sink = sink;
  }

  take(sequence: number, isFirst: boolean, payload: Buffer): void {
    if (isFirst && this.#next !== undefined && sequence !== this.#next) {
      this.end(); // the same ports once more
      this.#sink.gap();
      this.#next = undefined;
    }
    this.#next ??= sequence;
    if (payload.length === 0) return;
    if (this.#place(sequence, payload)) {
      this.#drain();
      return;
    }
    this.#waiting.push({ sequence, payload: Buffer.from(payload) });
    this.#waitingBytes += payload.length;
    while (this.#waitingBytes > WAITING_BYTES || this.#waiting.length > WAITING_SEGMENTS) this.#jump();
  }

  /** The capture ended: what waits is read, with gaps. */
  end(): void {
    while (this.#waiting.length > 0) this.#jump();
  }

  /** False when bytes before it are missing. */
  #place(sequence: number, payload: Buffer): boolean {
    const ahead = (sequence - this.#next!) | 0; // sequence numbers wrap at 2³²
    if (ahead > 0) return false;
    if (payload.length + ahead <= 0) return true; // all of it came before
    this.#sink.bytes(payload.subarray(-ahead));
    this.#next = (sequence + payload.length) >>> 0;
    return true;
  }

  #drain(): void {
    for (;;) {
      const at = this.#waiting.findIndex(({ sequence }) => ((sequence - this.#next!) | 0) <= 0);
      if (at < 0) return;
      const [{ sequence, payload }] = this.#waiting.splice(at, 1) as [{ sequence: number; payload: Buffer }];
      this.#waitingBytes -= payload.length;
      this.#place(sequence, payload);
    }
  }

  #jump(): void {
    const ahead = (s: { sequence: number }) => (s.sequence - this.#next!) | 0;
    const nearest = this.#waiting.reduce((a, b) => (ahead(b) < ahead(a) ? b : a));
    this.#sink.gap();
    this.#next = nearest.sequence;
    this.#drain();
  }
}
