import { describe, expect, test } from 'vitest';
import { createKeyPair, formatKey, isKeyPair, parseKey, publicHalf, verifyBytes } from '../../protocol/keys.ts';
import { refusalOf } from '../support/refusal.ts';

const pair = createKeyPair(new Uint8Array(32).fill(7), 'rollout');
const fields = (change: Record<string, unknown>): string =>
  JSON.stringify({ ...JSON.parse(formatKey(pair)), ...change });

describe('key files', () => {
  test('the half to give away has no private half', () => {
    expect(formatKey(publicHalf(pair))).not.toContain('private');
    expect(isKeyPair(publicHalf(pair))).toBe(false);
    expect(isKeyPair(parseKey(formatKey(pair)))).toBe(true);
    expect(parseKey(formatKey(pair)).kind).toBe('rollout');
  });

  test('new keys differ', () => {
    expect(createKeyPair().publicKey).not.toStrictEqual(createKeyPair().publicKey);
  });

  test.each([
    [
      'no JSON',
      'ssh-ed25519 AAAA',
      'expected a key file (JSON text), got something else; give a file that `stillwell keys new` wrote',
    ],
    ['a list', '[]', 'got another JSON value'],
    ['nothing', '', 'expected a key file'],
    ['a field too many', fields({ secret: 'x' }), '"secret" is not a field of a key file (kind, id, public, private)'],
    ['another kind', fields({ kind: 'root' }), '"kind": expected "author" or "rollout", got "root"'],
    ['no kind', fields({ kind: undefined }), '"kind": expected "author" or "rollout", got nothing'],
    [
      'a short public key',
      fields({ public: 'abcd' }),
      '"public": expected 32 bytes as 64 hexadecimal digits, got 4 characters',
    ],
    [
      'no public key',
      fields({ public: undefined }),
      '"public": expected 32 bytes as 64 hexadecimal digits, got nothing',
    ],
    [
      'a private key that is no text',
      fields({ private: 5 }),
      '"private": expected 32 bytes as 64 hexadecimal digits, got number',
    ],
    ['halves of two pairs', fields({ private: '00'.repeat(32) }), '"private" and "public" do not belong together'],
    ['an id of another key', fields({ id: '0011223344556677' }), '"id": expected '],
    ['a file too long', ' '.repeat(5000), 'at most 4096 bytes, got 5000'],
  ])('%s is refused, naming the file', (_, text, message) => {
    const refusal = refusalOf(() => parseKey(text, 'author.pub'));
    expect(refusal.code).toBe('key');
    expect(refusal.message).toContain('author.pub: ');
    expect(refusal.message).toContain(message);
    // A message must never repeat a private half.
    expect(refusal.message).not.toContain('07'.repeat(32));
  });

  test('a seed of another length is refused', () => {
    expect(refusalOf(() => createKeyPair(new Uint8Array(31))).message).toContain('expected 32 bytes, got 31');
  });

  test('a key or signature of another length never verifies and never throws', () => {
    expect(verifyBytes(new Uint8Array(31), new Uint8Array(1), new Uint8Array(64))).toBe(false);
    expect(verifyBytes(pair.publicKey, new Uint8Array(1), new Uint8Array(63))).toBe(false);
    expect(verifyBytes(new Uint8Array(32).fill(255), new Uint8Array(1), new Uint8Array(64))).toBe(false);
  });
});
