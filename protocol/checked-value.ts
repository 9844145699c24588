/** The one way in which schemas of files that people write read a value by hand. */
import { z } from 'zod';
import { showValue } from './issue.ts';

/** A value read by hand, so that the refusal can say what would have been right. `read` gives undefined to refuse. */
export const checked = <T>(expected: string | ((value: unknown) => string), read: (value: unknown) => T | undefined) =>
  z.unknown().transform((value, context): T => {
    const result = read(value);
    if (result !== undefined) return result;
    const wanted = typeof expected === 'string' ? expected : expected(value);
    context.addIssue({ code: 'custom', message: `expected ${wanted}, got ${showValue(value ?? undefined)}` });
    return z.NEVER;
  });
