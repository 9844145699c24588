/** What the gateway refused, as a closed set. */
export type RuntimeErrorCode =
  | 'options'
  | 'file'
  | 'data-folder'
  | 'locked'
  | 'keys'
  | 'bundle'
  | 'broker'
  | 'not-connected'
  | 'too-large'
  | 'checkpoint';

/**
 * Every refusal of the runtime that a person can mend: the message says what, where, expected, got and what to do.
 * The command line prints the message alone and exits with 2.
 *
 * details  small plain values that belong to the refusal (field, limit, path)
 */
export class RuntimeError extends Error {
  readonly code: RuntimeErrorCode;
  readonly details: Readonly<Record<string, unknown>>;

  constructor(
    code: RuntimeErrorCode,
    message: string,
    options: { details?: Record<string, unknown>; cause?: unknown } = {},
  ) {
    super(message, options.cause === undefined ? undefined : { cause: options.cause });
    this.name = 'RuntimeError';
    this.code = code;
    this.details = Object.freeze({ ...options.details });
  }
}
