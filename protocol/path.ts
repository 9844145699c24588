/**
 * Where in a document a value stands, written the way people read it: `signals[1].range[0]`.
 */

const PLAIN_KEY = /^[\p{L}_$][\p{L}\p{N}_$]*$/u;

/** Writes a path of keys and indices; a key that is no plain word stands quoted in brackets; the root is ''. */
export const formatPath = (path: readonly PropertyKey[]): string =>
  path.reduce<string>((text, step) => {
    if (typeof step === 'number') return `${text}[${step}]`;
    const key = String(step);
    if (!PLAIN_KEY.test(key)) return `${text}[${JSON.stringify(key)}]`;
    return text === '' ? key : `${text}.${key}`;
  }, '');
