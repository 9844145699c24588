/** What a fleet's table, page and fleet.json say of one fitted site: plain values, the same for the same inputs. */
import type { FittedSite } from '../fit-site.ts';
import { strongestSimple } from '../judge/gate.ts';
import type { Hindcast } from '../judge/hindcast.ts';
import { skillScore } from '../judge/scores.ts';
import { surveyNotes } from '../survey-notes.ts';

/** One signal's verdict; numbers null where there was nothing to judge. */
export interface SignalFacts {
  readonly signal: string;
  readonly skill: number | null;
  readonly best_rival: string;
  readonly coverage: number | null;
  readonly sentence: string;
}

/** Of one site. */
export interface SiteFacts {
  readonly site: string;
  readonly class: string;
  readonly tick_ms: number;
  readonly horizon: number;
  readonly signal_count: number;
  readonly input_count: number;
  /** Of the history that was laid on ticks. */
  readonly ticks: number;
  readonly from_ms: number;
  readonly to_ms: number;
  readonly kind: string;
  readonly model: string;
  readonly bundle_bytes: number;
  readonly has_skill: boolean;
  readonly mean_skill: number | null;
  readonly verdict: string;
  readonly nominal_coverage: number;
  /** Mean over the signals. */
  readonly coverage: number | null;
  readonly signals: readonly SignalFacts[];
  /** Mean skill over the signals by step ahead, at steps spread over the horizon. */
  readonly skill_by_step: readonly { readonly step: number; readonly skill: number | null }[];
  readonly warnings: readonly string[];
  readonly survey_notes: readonly string[];
}

/** Points of the curve of skill by step: enough for a small plot. */
const CURVE_POINTS = 16;
/** A skill lower than this counts as this in means, as in the verdict. */
const LEAST_COUNTED = -1;

/** Gathers them. */
export function siteFacts({ loaded, result, notes }: FittedSite): SiteFacts {
  const { bundle, hindcast, verdicts, chosen, document, warnings } = result;
  const { series } = loaded;
  const signals = verdicts.signals.map(({ signal, skill, bestRival, coverage, sentence }) => ({
    signal,
    skill: numberOrNull(skill),
    best_rival: bestRival,
    coverage: numberOrNull(coverage),
    sentence,
  }));
  return {
    site: bundle.site,
    class: bundle.equipmentClass,
    tick_ms: bundle.tickMs,
    horizon: hindcast.horizon,
    signal_count: series.signalCount,
    input_count: series.names.length - series.signalCount,
    ticks: series.ticks,
    from_ms: series.firstTick * series.tickMs,
    to_ms: (series.firstTick + series.ticks) * series.tickMs,
    kind: chosen.kind,
    model: chosen.name,
    bundle_bytes: document.length,
    has_skill: verdicts.hasSkill,
    mean_skill: numberOrNull(verdicts.meanSkill),
    verdict: verdicts.sentence,
    nominal_coverage: hindcast.nominalCoverage,
    coverage: mean(signals.map(({ coverage }) => coverage)),
    signals,
    skill_by_step: skillCurve(hindcast),
    warnings,
    survey_notes: [...surveyNotes(loaded.survey), ...notes],
  };
}

function skillCurve(hindcast: Hindcast): SiteFacts['skill_by_step'] {
  const H = hindcast.horizon;
  const count = Math.min(H, CURVE_POINTS);
  const steps = Array.from({ length: count }, (_, k) =>
    count === 1 ? 1 : 1 + Math.round((k * (H - 1)) / (count - 1)),
  );
  return steps.map((step) => ({
    step,
    skill: mean(hindcast.signals.map((_, signal) => skillAt(hindcast, signal, step))),
  }));
}

function skillAt(hindcast: Hindcast, signal: number, step: number): number | null {
  const { horizon: H, signals } = hindcast;
  const rival = strongestSimple(hindcast, signal, step - 1, step);
  if (rival === -1) return null;
  const cell = signal * H + step - 1;
  const theirs = hindcast.rivalMse[rival * signals.length * H + cell] as number;
  const skill = skillScore(hindcast.mse[cell] as number, theirs);
  return Number.isFinite(skill) ? Math.max(LEAST_COUNTED, skill) : null;
}

function mean(values: readonly (number | null)[]): number | null {
  const there = values.filter((value) => value !== null);
  return there.length === 0 ? null : there.reduce((sum, value) => sum + value, 0) / there.length;
}

function numberOrNull(value: number): number | null {
  return Number.isFinite(value) ? value : null;
}
