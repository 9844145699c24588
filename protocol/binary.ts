/**
 * Binary fields in a schema, with a refusal that says how many bytes were wanted.
 */
import { z } from 'zod';

/** Bytes of any length, or of exactly `length`. */
export const binary = (length?: number) =>
  z.custom<Uint8Array>((value) => value instanceof Uint8Array && (length === undefined || value.length === length), {
    message: length === undefined ? 'expected bytes' : `expected ${length} bytes`,
  });
