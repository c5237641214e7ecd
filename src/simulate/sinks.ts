import { writeSync } from 'node:fs';
import type { Socket } from 'node:net';

/** Where a node's bytes go: takes what there is room for and says how many that was; the rest is lost. */
export type Sink = (bytes: Uint8Array) => number;

/**
 * A non-blocking descriptor of a pseudo-terminal or a serial device. No room means that the other side does not
 * read, and a UART has no way to wait for it. A hung-up line takes everything and delivers nothing, as a
 * transmitter cannot tell that its cable is out.
 */
export function descriptorSink(descriptor: number): Sink {
  return (bytes) => {
    try {
      return writeSync(descriptor, bytes);
    } catch (error) {
      const { code } = error as NodeJS.ErrnoException;
      if (code === 'EAGAIN') return 0;
      if (code === 'EIO') return bytes.length;
      throw error;
    }
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
