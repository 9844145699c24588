/**
 * The answer to a question: the forecast under the plans asked about, beside the one that stands. JSON. A refusal is an answer
 * too, with its cause, so that no asker waits for what never comes.
 */
import { z } from 'zod';
import { ProtocolError } from './errors.ts';
import {
  type InputOutlook,
  inputOutlookSchema,
  LIMIT_NAMES,
  type LimitOutlook,
  limitOutlookFields,
  limitOutlookSchema,
  outlookFields,
} from './forecast.ts';
import { formatInstant } from './instant.ts';
import { MAX_CHANNELS, MAX_HORIZON, MAX_SIGNALS } from './limits.ts';
import { headFields, instantSchema, type MessageHead, nameSchema, readJson, writeHead, writeJson } from './message.ts';

const path = z.array(z.number()).min(1).max(MAX_HORIZON);
const limits = z.array(limitOutlookSchema).max(LIMIT_NAMES.length);

/** One signal's forecast under the question's plans, and the one that stands. */
export const answerSignalSchema = z.strictObject({
  signal: nameSchema,
  unit: z.string().min(1),
  median: path,
  lower: path,
  upper: path,
  limits,
  present: z.strictObject({ median: path, lower: path, upper: path, limits }),
});

/** Every field of an answer. */
export const answerSchema = z.strictObject({
  ...headFields('answer'),
  asker: nameSchema,
  id: z.string().min(1).optional(),
  outcome: z.enum(['answered', 'refused']),
  cause: z.string().min(1).optional(),
  reason: z.string().min(1).optional(),
  origin: instantSchema.optional(),
  tick_s: z.number().positive().optional(),
  coverage: z.number().gt(0).lt(1).optional(),
  inputs_ahead: z.array(inputOutlookSchema).max(MAX_CHANNELS).optional(),
  signals: z.array(answerSignalSchema).min(1).max(MAX_SIGNALS).optional(),
});

/** An answer as it stands in JSON. */
export type AnswerMessage = z.output<typeof answerSchema>;

/** Paths of one signal, (steps) each, in its unit. */
export interface AnswerPaths {
  readonly median: ArrayLike<number>;
  readonly lower: ArrayLike<number>;
  readonly upper: ArrayLike<number>;
  readonly limits: readonly LimitOutlook[];
}

/** Who asked. */
export interface AnswerTo extends MessageHead {
  readonly asker: string;
  readonly id: string | null;
}

/** What an answer is made of, beside the head. */
export interface AnswerFacts extends AnswerTo {
  /** Label of the last tick folded in; step h stands for origin + h ticks, at index h - 1. */
  readonly originMs: number;
  readonly tickMs: number;
  readonly coverage: number;
  /** What the forecast under the question made of each input, in the site's order. */
  readonly inputsAhead: readonly InputOutlook[];
  readonly signals: readonly (AnswerPaths & {
    readonly signal: string;
    readonly unit: string;
    readonly present: AnswerPaths;
  })[];
}

/** Why a question was refused. */
export interface Refusal {
  /** One word a program may switch on. */
  readonly cause: string;
  readonly reason: string;
}

const pathFields = ({ median, lower, upper, limits }: AnswerPaths) => ({
  median: Array.from(median),
  lower: Array.from(lower),
  upper: Array.from(upper),
  limits: limits.map(limitOutlookFields),
});

const toFields = (to: AnswerTo) => ({
  ...writeHead('answer', to),
  asker: to.asker,
  ...(to.id === null ? {} : { id: to.id }),
});

/** Refuses what an outcome may not be without, and paths of unlike lengths. */
const checkAnswer = (message: AnswerMessage): AnswerMessage => {
  const refuse = (expected: string, got: string): never => {
    throw new ProtocolError('schema', `answer message: expected ${expected}, got ${got}`);
  };
  const { outcome, cause, reason, origin, tick_s, coverage, inputs_ahead, signals } = message;
  if (outcome === 'refused') {
    if (cause === undefined || reason === undefined) refuse('cause and reason of a refusal', 'none');
    if (signals !== undefined) refuse('a refusal without forecasts', `${signals.length} signals`);
    return message;
  }
  if (cause !== undefined || reason !== undefined) refuse('no cause in an answer', `${cause ?? reason}`);
  if (origin === undefined || tick_s === undefined || coverage === undefined || inputs_ahead === undefined)
    refuse('origin, tick_s, coverage and inputs_ahead', 'less');
  if (signals === undefined) return refuse('signals', 'none');
  const steps = signals[0]!.median.length;
  for (const one of signals) {
    for (const { median, lower, upper } of [one, one.present])
      if (median.length !== steps || lower.length !== steps || upper.length !== steps)
        refuse(`${steps} steps in every path`, `${median.length}, ${lower.length}, ${upper.length} of ${one.signal}`);
  }
  return message;
};

/**
 * Payload of an answer.
 *
 * shapes  every path of all signals of one length
 * units   times ms since 1970; paths and limits in the signal's unit
 * throws  ProtocolError 'encode' on a number that is not finite, 'schema' on paths that do not fit together
 */
export const answerMessage = (facts: AnswerFacts): Uint8Array => {
  const message: AnswerMessage = {
    ...toFields(facts),
    outcome: 'answered',
    origin: formatInstant(facts.originMs),
    tick_s: facts.tickMs / 1000,
    coverage: facts.coverage,
    inputs_ahead: facts.inputsAhead.map(outlookFields),
    signals: facts.signals.map((one) => ({
      signal: one.signal,
      unit: one.unit,
      ...pathFields(one),
      present: pathFields(one.present),
    })),
  };
  const payload = writeJson(message);
  checkAnswer(message);
  return payload;
};

/** Payload of a refusal. */
export const refusalMessage = (to: AnswerTo, { cause, reason }: Refusal): Uint8Array =>
  writeJson({ ...toFields(to), outcome: 'refused', cause, reason } satisfies AnswerMessage);

/** Reads an answer; throws ProtocolError 'size', 'decode', 'format' or 'schema'. */
export const parseAnswerMessage = (payload: Uint8Array): AnswerMessage =>
  checkAnswer(readJson(answerSchema, 'answer', payload));
