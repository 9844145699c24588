/** What the trainer or desk refused, as a closed set. */
export type TrainErrorCode =
  | 'file'
  | 'history'
  | 'options'
  | 'fit'
  | 'no-skill'
  | 'keys'
  | 'bundle'
  | 'factors'
  | 'archive'
  | 'broker';

/**
 * Every refusal of the trainer that a person can mend: the message says what, where, expected, got and what to do.
 * The command line prints the message alone and exits with 2.
 */
export class TrainError extends Error {
  readonly code: TrainErrorCode;
  readonly details: Readonly<Record<string, unknown>>;

  constructor(
    code: TrainErrorCode,
    message: string,
    options: { details?: Record<string, unknown>; cause?: unknown } = {},
  ) {
    super(message, options.cause === undefined ? undefined : { cause: options.cause });
    this.name = 'TrainError';
    this.code = code;
    this.details = Object.freeze({ ...options.details });
  }
}
