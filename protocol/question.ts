/**
 * A question: what the forecast would be under another plan of the inputs. JSON, from people, displays and PLCs; data of
 * others, so whatever is in it, the result is a question or one refusal, which names the asker where it could be read.
 */
import { z } from 'zod';
import { checked } from './checked-value.ts';
import { formatDuration, parseDuration } from './duration.ts';
import { ProtocolError } from './errors.ts';
import { deepFreeze } from './freeze.ts';
import { formatInstant } from './instant.ts';
import { formatFault, listFaults, showValue } from './issue.ts';
import { MAX_ID_BYTES, MAX_PAYLOAD_BYTES } from './limits.ts';
import { isName, NAME_RULE } from './name.ts';
import { nearestName } from './nearest.ts';
import { type Plan, readPlan } from './plan.ts';
import type { Site } from './site.ts';

/** Why a question was refused before anybody looked at forecasts, for counting; in `details.reason`. */
export type QuestionReason = 'size' | 'syntax' | 'fields' | 'plan';

const asker = checked(NAME_RULE, (value) => (typeof value === 'string' && isName(value) ? value : undefined));
const id = checked(`text of at most ${MAX_ID_BYTES} bytes`, (value) =>
  typeof value === 'string' && value !== '' && Buffer.byteLength(value) <= MAX_ID_BYTES ? value : undefined,
);
const plans = checked<Readonly<Record<string, unknown>>>('a map of inputs and their plans, one at least', (value) =>
  typeof value === 'object' && value !== null && !Array.isArray(value) && Object.keys(value).length > 0
    ? (value as Readonly<Record<string, unknown>>)
    : undefined,
);
const horizon = checked<{ ticks: number } | { ms: number }>(
  'a whole number of ticks from 1 up, or a duration such as "1h"',
  (value) => {
    if (typeof value === 'number') return Number.isSafeInteger(value) && value >= 1 ? { ticks: value } : undefined;
    const ms = typeof value === 'string' ? parseDuration(value) : null;
    return ms !== null && ms > 0 ? { ms } : undefined;
  },
);
const signals = checked<readonly string[]>('a list of signal names, one at least', (value) =>
  Array.isArray(value) && value.length > 0 && value.every((one) => typeof one === 'string') ? value : undefined,
);

/** Every field of a question. */
export const questionSchema = z.strictObject({
  asker,
  id: id.optional(),
  plans,
  horizon: horizon.optional(),
  signals: signals.optional(),
});

/** A question that can be answered. */
export interface Question {
  readonly asker: string;
  /** The asker's own mark, said again in the answer; null: none. */
  readonly id: string | null;
  /** Plans to be tried, by number of the input; null: as without a plan. */
  readonly plans: readonly { readonly input: number; readonly plan: Plan | null }[];
  /** Steps asked for, 1 to the horizon. */
  readonly steps: number;
  /** Numbers of the signals asked about, ascending. */
  readonly signals: readonly number[];
}

/** What a question is held against. */
export interface QuestionRules {
  readonly site: Site;
  /** The present moment; null: not known. */
  readonly nowMs: number | null;
  /** Start of the first tick that is forecast, where a plan does not say when it begins. */
  readonly startMs: number;
}

const refuse = (reason: QuestionReason, what: string, from: string | null, cause?: unknown): never => {
  throw new ProtocolError('question', `question: ${what}`, { details: { reason, asker: from }, cause });
};

const documentOf = (payload: Uint8Array): unknown => {
  if (payload.length > MAX_PAYLOAD_BYTES)
    refuse('size', `expected at most ${MAX_PAYLOAD_BYTES} bytes, got ${payload.length}`, null);
  try {
    return JSON.parse(new TextDecoder('utf-8', { fatal: true }).decode(payload));
  } catch (cause) {
    return refuse('syntax', `expected JSON text in UTF-8, got ${payload.length} other bytes`, null, cause);
  }
};

/** Who asks, even where the rest cannot be read. */
const askerOf = (document: unknown): string | null => {
  const name = typeof document === 'object' && document !== null ? (document as { asker?: unknown }).asker : null;
  return typeof name === 'string' && isName(name) ? name : null;
};

const indexOf = (names: readonly string[], name: string, what: string, from: string): number => {
  const at = names.indexOf(name);
  if (at >= 0) return at;
  const near = nearestName(name, names);
  const hint = near === null ? `one of ${names.join(', ') || 'none'}` : `"${near}"?`;
  return refuse('fields', `${what}: no such name, ${showValue(name)}; did you mean ${hint}`, from);
};

/** A plan as a question may put it: also a value to be held, or values from the next tick on. */
const planOf = (given: unknown, input: number, { site, nowMs, startMs }: QuestionRules): Plan | null => {
  if (given === null) return null;
  const { tickMs, horizon, inputs } = site;
  const { range } = inputs[input]!;
  const held = typeof given === 'number' || typeof given === 'boolean';
  const [start, end] = [startMs, startMs + horizon * tickMs].map(formatInstant);
  const isSeries = typeof given === 'object' && !Array.isArray(given) && 'values' in given;
  const filled = held
    ? { start, step: formatDuration(tickMs), values: [given], end }
    : isSeries
      ? { start, step: formatDuration(tickMs), ...given }
      : given;
  return readPlan(filled, { tickMs, horizon, range, nowMs });
};

const stepsOf = (given: { ticks: number } | { ms: number } | undefined, { tickMs, horizon }: Site): number => {
  if (given === undefined) return horizon;
  return Math.min(horizon, 'ticks' in given ? given.ticks : Math.max(1, Math.round(given.ms / tickMs)));
};

/**
 * Reads a question.
 *
 * units   plans in the inputs' units; times as in plans
 * throws  ProtocolError 'question', with `details.reason` (QuestionReason) for counting and `details.asker`, null where
 *         it could not be read
 */
export const parseQuestion = (payload: Uint8Array, rules: QuestionRules): Question => {
  const document = documentOf(payload);
  const from = askerOf(document);
  const parsed = questionSchema.safeParse(document);
  if (!parsed.success) {
    const keys = (path: readonly PropertyKey[]) => (path.length === 0 ? Object.keys(questionSchema.shape) : []);
    return refuse('fields', formatFault(listFaults(parsed.error, document, keys)[0]!), from);
  }
  const { site } = rules;
  const question = parsed.data;
  const inputs = site.inputs.map(({ name }) => name);
  const names = site.signals.map(({ name }) => name);
  const plans = Object.entries(question.plans).map(([name, given]) => {
    const input = indexOf(inputs, name, 'plans', question.asker);
    try {
      return { input, plan: planOf(given, input, rules) };
    } catch (cause) {
      return refuse('plan', `plans.${name}: ${(cause as Error).message}`, question.asker, cause);
    }
  });
  const asked = question.signals?.map((name) => indexOf(names, name, 'signals', question.asker));
  return deepFreeze({
    asker: question.asker,
    id: question.id ?? null,
    plans,
    steps: stepsOf(question.horizon, site),
    signals: asked === undefined ? names.map((_, i) => i) : [...new Set(asked)].sort((a, b) => a - b),
  });
};
