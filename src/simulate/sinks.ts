import type { Socket } from 'node:net';
import type { Pty } from './pty.ts';

/** Where a node's bytes go: takes what there is room for and says how many that was; the rest is lost. */
export type Sink = (bytes: Uint8Array) => number;

/** A pseudo-terminal. No room means that the other side does not read, and a UART has no way to wait for it. */
export function ptySink(pty: Pty): Sink {
  return (bytes) => {
    const before = pty.droppedBytes;
    pty.write(bytes);
    return bytes.length - (pty.droppedBytes - before);
  };
}

/** A socket, with no more waiting than a serial device server would buffer. */
export function socketSink(socket: Socket, mostWaiting = 65_536): Sink {
  return (bytes) => {
    if (socket.destroyed || socket.writableLength > mostWaiting) return 0;
    socket.write(Buffer.from(bytes));
    return bytes.length;
  };
}

/**
 * A node with memory before its line, as one on USB has: the host fetches when it can. `sink` gets what waits first;
 * a frame that no longer fits is dropped whole.
 */
export function bufferedSink(sink: Sink, capacityBytes: number): Sink {
  const waiting: Uint8Array[] = [];
  let waitingBytes = 0;
  return (bytes) => {
    while (waiting.length > 0) {
      const first = waiting[0]!;
      const taken = sink(first);
      waitingBytes -= taken;
      if (taken < first.length) {
        waiting[0] = first.subarray(taken);
        break;
      }
      waiting.shift();
    }
    const taken = waiting.length === 0 ? sink(bytes) : 0;
    const rest = bytes.length - taken;
    if (rest === 0) return bytes.length;
    if (waitingBytes + rest > capacityBytes) return taken;
    waiting.push(bytes.slice(taken));
    waitingBytes += rest;
    return bytes.length;
  };
}
