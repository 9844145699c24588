/**
 * Names of sites, signals, inputs and gateways. A name is one level of a topic and part of a file name, so it is kept
 * to letters, digits, dot, hyphen and underscore.
 */
import { MAX_NAME_BYTES } from './limits.ts';

const NAME = /^[\p{L}\p{Nd}_][\p{L}\p{M}\p{Nd}._-]*$/u;

/** What a name may be, for messages. */
export const NAME_RULE = `a name of letters, digits, ".", "-" and "_", at most ${MAX_NAME_BYTES} bytes`;

/** Whether a text may stand as a name; letters of any script, in composed form (NFC). */
export const isName = (text: string): boolean =>
  NAME.test(text) && text === text.normalize('NFC') && Buffer.byteLength(text) <= MAX_NAME_BYTES;

/** A name made out of any label, such as a column heading: "Flow rate [m³/h]" gives "Flow_rate_m_h"; '' gives "unnamed". */
export const toName = (label: string): string => {
  let name = label
    .normalize('NFC')
    .replace(/[^\p{L}\p{M}\p{Nd}.-]+/gu, '_')
    .replace(/^[^\p{L}\p{Nd}]+|[_.-]+$/gu, '');
  while (Buffer.byteLength(name) > MAX_NAME_BYTES) name = Array.from(name).slice(0, -1).join('');
  return isName(name) ? name : 'unnamed';
};
