/**
 * What a question comes to: the forecast under its plans beside the one that stands. Nothing of the gateway moves: the filter,
 * its bounds, the ruling plans and the record are read, and the forecast that stands is the same to the bit afterwards.
 *
 * Bounds are the serving ones, as wide around either path: how far forecasts were off of late. Whether the plant would answer to
 * a plan as it was learned nobody has tried, so that a plan beyond what the model was trained on is said with an S.
 */
import {
  type AnswerPaths,
  type AnswerTo,
  answerMessage,
  type InputOutlook,
  type Quality,
  type Question,
} from '@stillwell/protocol';
import { planAtTick } from '../ingest/plan-ticks.ts';
import { limitOutlook, rounding } from '../publish/forecasts.ts';
import { useOf } from '../publish/inputs.ts';
import { headOf, type Occasion } from '../publish/moment.ts';
import { type Outlook, outlooksOf } from '../publish/outlooks.ts';
import type { Paths, Serving } from '../serving.ts';

/** Letters of one answer, the gravest first. */
const GRAVITY: readonly Quality[] = ['F', 'C', 'S', 'M'];

/** Answers questions of one gateway; its buffers are allocated once for a bundle. */
export class Answerer {
  #plan = new Float64Array(0);
  #paths: Paths = pathsOf(0);

  /** Payload of the answer. occasion  with what the forecasts that stand made of the inputs */
  answer(serving: Serving, occasion: Occasion, question: Question): Uint8Array {
    const { model } = serving;
    const inputCount = model.channelCount - model.signalCount;
    if (this.#plan.length !== inputCount * model.horizon) this.#plan = new Float64Array(inputCount * model.horizon);
    if (this.#paths.median.length !== serving.median.length) this.#paths = pathsOf(serving.median.length);
    const { site } = occasion;
    // A bundle may reach less far than the site file says.
    const steps = Math.min(question.steps, model.horizon);
    const inputs = this.#inputsUnder(serving, occasion, question);
    const asked = question.signals.map((signal): { signal: number; outlooks: Outlook[] } => ({ signal, outlooks: [] }));
    serving.whatIf(
      this.#plan,
      (plan) => lay(serving, occasion, question, plan),
      this.#paths,
      () => {
        for (const one of asked)
          one.outlooks = outlooksOf(serving, this.#paths.median, one.signal, site.signals[one.signal]!.limits);
      },
    );
    serving.computeBounds();
    return answerMessage({
      ...this.#headOf(serving, { ...occasion, inputs }, question),
      originMs: serving.tick * model.tickMs,
      tickMs: model.tickMs,
      coverage: model.coverage,
      inputsAhead: inputs,
      signals: asked.map(({ signal, outlooks }) => ({
        signal: site.signals[signal]!.name,
        unit: site.signals[signal]!.unit,
        ...shown(serving, this.#paths, signal, steps, outlooks),
        present: shown(
          serving,
          serving,
          signal,
          steps,
          outlooksOf(serving, serving.median, signal, site.signals[signal]!.limits),
        ),
      })),
    });
  }

  /** What the answer makes of each input: nobody has held the plans asked about against anything yet. */
  #inputsUnder(serving: Serving, { inputs, issuedAtMs }: Occasion, { plans }: Question): InputOutlook[] {
    return inputs.map((outlook, u): InputOutlook => {
      const asked = plans.find(({ input }) => input === u);
      if (asked === undefined) return outlook;
      const { plan } = asked;
      return {
        ...outlook,
        use: useOf(serving, plan, u),
        planAgeMs: plan === null ? null : Math.max(0, issuedAtMs - (plan.issuedAtMs ?? issuedAtMs)),
        planUntilMs: plan?.endMs ?? null,
        planError: null,
      };
    });
  }

  /** Judged by the signals asked about; the gravest word counts. */
  #headOf(serving: Serving, occasion: Occasion, question: Question): AnswerTo {
    const heads = question.signals.map((signal) => headOf(serving, occasion, signal));
    const fault = trainedRangeFault(serving, occasion, question);
    const found = [
      ...heads,
      ...(fault === null ? [] : [{ ...heads[0]!, quality: 'S' as const, qualityReason: fault }]),
    ].filter(({ quality }) => quality !== null);
    const worst = GRAVITY.flatMap((letter) => found.find(({ quality }) => quality === letter) ?? [])[0] ?? heads[0]!;
    return { ...worst, asker: question.asker, id: question.id };
  }
}

function pathsOf(length: number): Paths {
  return { median: new Float64Array(length), lower: new Float64Array(length), upper: new Float64Array(length) };
}

/** Puts the plans asked about into `plan`, (nu × H) standardised, in place of what stands there. */
function lay({ model, tick }: Serving, { site }: Occasion, { plans }: Question, plan: Float64Array): void {
  const H = model.horizon;
  for (const { input, plan: asked } of plans) {
    const channel = model.signalCount + input;
    const { aggregate } = site.inputs[input]!;
    for (let h = 1; h <= H; h++) {
      const value = asked === null ? Number.NaN : planAtTick(asked, aggregate, tick + h, site.tickMs);
      plan[input * H + h - 1] = (value - model.mean[channel]!) / model.scale[channel]!;
    }
  }
}

/** Which plan leaves what the model was trained on, as a sentence; null: none that it listens to does. */
function trainedRangeFault(serving: Serving, { site }: Occasion, { plans, steps }: Question): string | null {
  const { model, tick } = serving;
  for (const { input, plan } of plans) {
    if (plan === null || useOf(serving, plan, input) !== 'planned') continue;
    const { name, unit, aggregate } = site.inputs[input]!;
    const low = model.clipLow[model.signalCount + input]!;
    const high = model.clipHigh[model.signalCount + input]!;
    for (let h = 1; h <= steps; h++) {
      const value = planAtTick(plan, aggregate, tick + h, site.tickMs);
      if (value >= low && value <= high) continue;
      if (Number.isNaN(value)) continue;
      return `${name}: the plan leaves the trained range, ${short(low)} to ${short(high)} ${unit}, with ${short(value)} at step ${h}`;
    }
  }
  return null;
}

function shown(
  serving: Serving,
  paths: Paths,
  signal: number,
  steps: number,
  outlooks: readonly Outlook[],
): AnswerPaths {
  const H = serving.model.horizon;
  const round = rounding(serving.checked.bundle.channels[signal]!);
  const of = (values: Float64Array): number[] => Array.from(values.subarray(signal * H, signal * H + steps), round);
  return {
    median: of(paths.median),
    lower: of(paths.lower),
    upper: of(paths.upper),
    limits: outlooks.map((outlook) => limitOutlook(serving, outlook)),
  };
}

/** Six digits of a figure for a sentence. */
function short(value: number): number {
  return Number(value.toPrecision(6));
}
