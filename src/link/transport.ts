/** A byte stream towards a sensor node, whatever carries it. Each is opened once; another try makes another one. */

export interface TransportHandlers {
  /** The bytes hold only until this returns. */
  onBytes(chunk: Uint8Array): void;
  /** The far end or the device went away, after a successful open; told once, and not after `close`. */
  onClosed(why: string): void;
}

export interface Transport {
  /** @throws OpenError where it cannot be opened. */
  open(handlers: TransportHandlers): Promise<void>;
  /** Lets go of the device, also after a failure; may be called more than once. */
  close(): Promise<void>;
}

export type OpenFailure =
  /** There is no such device or host. */
  | 'missing'
  /** Another program holds it. */
  | 'busy'
  | 'not-permitted'
  /** It is no serial port, or cannot do this baud rate. */
  | 'unfit'
  /** The host is there and does not take the connection. */
  | 'refused'
  | 'unreachable'
  | 'timeout'
  | 'other';

/** Why a link could not be opened: a sentence, and what to do about it. */
export class OpenError extends Error {
  readonly failure: OpenFailure;
  readonly fix: string;

  constructor(failure: OpenFailure, message: string, fix: string, options?: ErrorOptions) {
    super(message, options);
    this.name = 'OpenError';
    this.failure = failure;
    this.fix = fix;
  }
}

export function codeOf(error: unknown): string {
  return (error as NodeJS.ErrnoException | null)?.code ?? '';
}

export function textOf(error: unknown): string {
  return error instanceof Error ? error.message : String(error);
}
