/** What went wrong, as a closed set that programs may switch on. */
export type ProtocolErrorCode =
  | 'size'
  | 'envelope'
  | 'key'
  | 'signature'
  | 'digest'
  | 'encode'
  | 'scan'
  | 'decode'
  | 'schema'
  | 'format'
  | 'site-file'
  | 'fleet-file'
  | 'payload'
  | 'plan'
  | 'question'
  | 'topic'
  | 'tensor'
  | 'segment';

/**
 * Every refusal of `protocol`: the message says what, where, expected and got; `code` is for programs.
 *
 * details  small plain values that belong to the refusal (field, offset, limit)
 */
export class ProtocolError extends Error {
  readonly code: ProtocolErrorCode;
  readonly details: Readonly<Record<string, unknown>>;

  constructor(
    code: ProtocolErrorCode,
    message: string,
    options: { details?: Record<string, unknown>; cause?: unknown } = {},
  ) {
    super(message, options.cause === undefined ? undefined : { cause: options.cause });
    this.name = 'ProtocolError';
    this.code = code;
    this.details = Object.freeze({ ...options.details });
  }
}
