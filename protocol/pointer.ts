/**
 * JSON pointers (RFC 6901): where in a decoded payload a value stands. Not for URI fragments (section 6), which no
 * payload mapping needs.
 */
import { ProtocolError } from './errors.ts';

/** Whether a text is a JSON pointer: '' or '/' and tokens, with ~ only as ~0 and ~1 (RFC 6901 section 3). */
export const isPointer = (text: string): boolean => /^(?:\/(?:[^~/]|~[01])*)*$/.test(text);

/**
 * The reference tokens of a pointer, unescaped.
 *
 * throws  ProtocolError 'payload' if the text is no pointer
 * source  RFC 6901 section 4: ~1 before ~0, so that ~01 stands for ~1
 */
export const pointerTokens = (pointer: string): readonly string[] => {
  if (!isPointer(pointer)) {
    throw new ProtocolError('payload', `expected a JSON pointer such as "/value", got ${JSON.stringify(pointer)}`, {
      details: { pointer },
    });
  }
  const tokens = pointer.split('/').slice(1);
  return tokens.map((token) => token.replaceAll('~1', '/').replaceAll('~0', '~'));
};

/** An array index without leading zeros (RFC 6901 section 4). */
const INDEX = /^(?:0|[1-9]\d*)$/;

/**
 * The value that tokens name in a document, undefined if there is none. Own properties only, so no token reaches a
 * prototype; '-' (after the last entry) names no value.
 *
 * source  RFC 6901 section 4
 */
export const resolveTokens = (document: unknown, tokens: readonly string[]): unknown => {
  let value = document;
  for (const token of tokens) {
    if (Array.isArray(value)) value = INDEX.test(token) ? value[Number(token)] : undefined;
    else if (typeof value === 'object' && value !== null && Object.hasOwn(value, token)) {
      value = (value as Record<string, unknown>)[token];
    } else return undefined;
  }
  return value;
};

/** The value a pointer names in a document. throws  ProtocolError 'payload' if the text is no pointer */
export const resolvePointer = (document: unknown, pointer: string): unknown =>
  resolveTokens(document, pointerTokens(pointer));
