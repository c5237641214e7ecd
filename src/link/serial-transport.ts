/**
 * A serial device: opened, configured and locked by serialport's binding, read as a terminal stream.
 *
 * The stream reads a second descriptor of the same device. Node reopens the descriptor that it is given, and with
 * the first one gone so would be the lock (flock belongs to the open file). The binding's own reader is not used:
 * after an unplug under load it spins without telling anybody.
 *
 * Steps: 1 the binding opens, sets raw 8N1, locks, sets the rate; 2 the rate that the driver took is read back;
 * 3 the second descriptor is opened and read; 4 at the end stream, descriptor and binding are closed.
 */

import { close, constants, open } from 'node:fs';
import { stat } from 'node:fs/promises';
import type { OnReadOpts, SocketConstructorOpts } from 'node:net';
import { ReadStream } from 'node:tty';
import { promisify } from 'node:util';
import type { SerialPort } from 'serialport';
import { listSerialPorts } from './list-ports.ts';
import { codeOf, OpenError, type Transport, type TransportHandlers, textOf } from './transport.ts';

const READ_BUFFER_BYTES = 65_536;
/** A UART still receives with a rate this far off (a tenth of the half bit that ten bits may drift). */
const BAUD_TOLERANCE = 0.02;

const openDescriptor = promisify(open);
const closeDescriptor = promisify(close);

/** Loaded when first needed: a station without serial links runs where there is no binding for the processor. */
async function loadBinding(): Promise<typeof SerialPort.binding> {
  try {
    return (await import('serialport')).SerialPort.binding;
  } catch (error) {
    const fix = 'Install the package again on this machine, or use a serial device server over TCP.';
    throw new OpenError('unfit', `no serial ports on this machine: ${textOf(error)}`, fix, { cause: error });
  }
}

export class SerialTransport implements Transport {
  readonly #path: string;
  readonly #baud: number;
  #binding: Awaited<ReturnType<typeof SerialPort.binding.open>> | null = null;
  #stream: ReadStream | null = null;
  #descriptor: number | null = null;
  #closed = false;

  constructor(path: string, baud: number) {
    this.#path = path;
    this.#baud = baud;
  }

  async open(handlers: TransportHandlers): Promise<void> {
    await this.#checkDevice();
    try {
      const binding = await loadBinding();
      this.#binding = await binding.open({
        path: this.#path,
        baudRate: this.#baud,
        lock: true,
        // Dropping DTR at each close would reset many a node at each reopening.
        hupcl: false,
      });
      if (this.#closed)
        throw new OpenError('other', `${this.#path} was closed while opening`, 'Nothing to do.');
      await this.#checkBaud();
      const flags = constants.O_RDONLY | constants.O_NOCTTY | constants.O_NONBLOCK;
      this.#descriptor = await openDescriptor(this.#path, flags);
      if (this.#closed)
        throw new OpenError('other', `${this.#path} was closed while opening`, 'Nothing to do.');
      this.#read(this.#descriptor, handlers);
    } catch (error) {
      await this.close();
      throw error instanceof OpenError ? error : this.#explain(error);
    }
  }

  async close(): Promise<void> {
    this.#closed = true;
    const stream = this.#stream;
    const descriptor = this.#descriptor;
    const binding = this.#binding;
    this.#stream = null;
    this.#descriptor = null;
    this.#binding = null;
    // Where Node could not reopen the descriptor, the stream has it for its own and closes it.
    let owned = false;
    if (stream) {
      owned = (stream as unknown as { _handle: { fd: number } | null })._handle?.fd === descriptor;
      stream.destroy();
    }
    if (descriptor !== null && !owned) await closeDescriptor(descriptor).catch(() => undefined);
    if (binding?.isOpen) await binding.close().catch(() => undefined);
  }

  #read(descriptor: number, handlers: TransportHandlers): void {
    const buffer = Buffer.allocUnsafeSlow(READ_BUFFER_BYTES);
    // One buffer for all reads; the types leave out what net.Socket takes here.
    const options: SocketConstructorOpts & { onread: OnReadOpts } = {
      onread: {
        buffer,
        callback: (length) => {
          if (!this.#closed) handlers.onBytes(buffer.subarray(0, length));
          return true;
        },
      },
    };
    const stream = new ReadStream(descriptor, options);
    this.#stream = stream;
    const gone = (why: string) => {
      if (this.#closed) return;
      void this.close();
      handlers.onClosed(why);
    };
    stream.on('error', (error) => gone(`${this.#path}: ${textOf(error)}`));
    stream.on('end', () => gone(`${this.#path} was unplugged or hung up`));
    stream.on('close', () => gone(`${this.#path} was closed`));
    stream.resume();
  }

  async #checkDevice(): Promise<void> {
    let isDevice: boolean;
    try {
      isDevice = (await stat(this.#path)).isCharacterDevice();
    } catch (error) {
      throw await this.#explainMissing(error);
    }
    if (!isDevice)
      throw new OpenError('unfit', `${this.#path} is no serial device`, 'Give the path of a device.');
  }

  /** A driver that cannot do a rate takes another one without complaint. */
  async #checkBaud(): Promise<void> {
    const { baudRate } = (await this.#binding?.getBaudRate()) ?? { baudRate: 0 };
    if (Math.abs(baudRate / this.#baud - 1) <= BAUD_TOLERANCE) return;
    throw new OpenError(
      'unfit',
      `${this.#path} cannot do ${this.#baud} baud, its driver made it ${baudRate}`,
      'Set a rate that both the port and the node can do.',
    );
  }

  async #explainMissing(error: unknown): Promise<OpenError> {
    if (codeOf(error) !== 'ENOENT' && codeOf(error) !== 'ENOTDIR') return this.#explain(error);
    const ports = await listSerialPorts();
    const present = ports.length > 0 ? `present: ${ports.join(', ')}` : 'no serial device is present';
    return new OpenError(
      'missing',
      `${this.#path} is not there (${present})`,
      'Plug the node in, or correct the path.',
      { cause: error },
    );
  }

  /** The binding's errors carry the operating system's text and no code. */
  #explain(error: unknown): OpenError {
    const text = `${this.#path}: ${textOf(error)}`;
    const options = { cause: error };
    if (/lock port|busy/i.test(text)) {
      return new OpenError(
        'busy',
        `${this.#path} is held by another program`,
        'Stop that program first.',
        options,
      );
    }
    if (/permission denied|EACCES|EPERM/i.test(text)) {
      const fix = 'Let this user into the group that owns the device, often dialout.';
      return new OpenError('not-permitted', text, fix, options);
    }
    if (/no such (file|device)|not a directory|ENOENT|ENXIO|ENODEV/i.test(text)) {
      return new OpenError('missing', text, 'Plug the node in, or correct the path.', options);
    }
    if (/inappropriate ioctl|not a tty|ENOTTY|ERR_INVALID_FD_TYPE|baud/i.test(text)) {
      return new OpenError(
        'unfit',
        text,
        'Give the path of a serial device, and a rate that it can do.',
        options,
      );
    }
    return new OpenError('other', text, 'See what the operating system says about this device.', options);
  }
}
