/** Thrown where a signal function is asked outside of where it is valid: names the quantity, its value and what would do. */
export class SignalRangeError extends RangeError {
  /** The argument at fault, as `stopHz`. */
  readonly quantity: string;

  constructor(quantity: string, value: unknown, needed: string) {
    super(`${quantity} is ${String(value)}: ${needed}`);
    this.name = 'SignalRangeError';
    this.quantity = quantity;
  }
}

export function requirePositive(quantity: string, value: number): void {
  if (!(Number.isFinite(value) && value > 0)) {
    throw new SignalRangeError(quantity, value, 'needs a finite number above 0');
  }
}

export function requireCount(quantity: string, value: number, least: number): void {
  if (!(Number.isSafeInteger(value) && value >= least)) {
    throw new SignalRangeError(quantity, value, `needs a whole number, ${least} or more`);
  }
}
