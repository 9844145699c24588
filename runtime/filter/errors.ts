/**
 * Refusals of the filter. Our own mistakes (a wrong shape, a tick out of turn, a damaged snapshot) throw; readings from
 * outside never do: whatever their value, the filter clips them, passes them over or takes them as missing.
 */

/** What went wrong, as a closed set that programs may switch on. */
export type FilterErrorCode = 'model' | 'shape' | 'tick' | 'snapshot';

/**
 * A refusal of `runtime/filter`: the message says what, where, expected and got.
 *
 * details  small plain values that belong to the refusal (field, index, expected, got)
 */
export class FilterError extends Error {
  readonly code: FilterErrorCode;
  readonly details: Readonly<Record<string, unknown>>;

  constructor(
    code: FilterErrorCode,
    message: string,
    options: { details?: Record<string, unknown>; cause?: unknown } = {},
  ) {
    super(message, options.cause === undefined ? undefined : { cause: options.cause });
    this.name = 'FilterError';
    this.code = code;
    this.details = Object.freeze({ ...options.details });
  }
}
