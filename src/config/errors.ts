/**
 * The catalogue of errors a person can meet: a stable code, one sentence, the fix. Each code stands once here and
 * once in config/ERRORS.md; a test holds the two against each other.
 */

export const errorCatalogue = {
  'file.unreadable': 'Check the path and that this user may read it.',
  'recording.malformed': 'Export the recording again as PCM WAV, 16 to 32 bit, and check that it was copied whole.',
} as const satisfies Record<string, string>;

export type ErrorCode = keyof typeof errorCatalogue;

/** An error with a code of the catalogue; `message` names what and where, `fix` what to do about it. */
export class ForebayError extends Error {
  readonly code: ErrorCode;
  readonly fix: string;

  constructor(code: ErrorCode, message: string, options?: ErrorOptions) {
    super(message, options);
    this.name = 'ForebayError';
    this.code = code;
    this.fix = errorCatalogue[code];
  }
}
