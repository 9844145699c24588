/** What a condenser is worth, in one sentence. */
import type { CondenseScore } from './condense-states.ts';
import type { Condenser } from './condenser.ts';

/** Less than this is no skill. */
const LEAST_SKILL = 0.01;

/** Over all steps: share of the squared error that is saved beside the better of held and mean frame at each; null: not judged. */
export function condenseSkill(score: CondenseScore | null): number | null {
  if (score === null) return null;
  let ours = 0;
  let rival = 0;
  for (let h = 0; h < score.ours.length; h++) {
    ours += score.ours[h];
    rival += Math.min(score.held[h], score.mean[h]);
  }
  return rival > 0 ? 1 - ours / rival : null;
}

/** The sentence, and whether it is a good one. */
export function condenseVerdict(
  { record, own }: Condenser,
  score: CondenseScore | null,
): { readonly hasSkill: boolean; readonly skill: number | null; readonly sentence: string } {
  const skill = condenseSkill(score);
  const few = record.order === 1 ? '1 state' : `${record.order} states`;
  const states = own.some((value) => value !== 0) ? `${few} and the newest frame` : few;
  if (skill === null)
    return { hasSkill: false, skill, sentence: `${states}; no held-out time was long enough to judge.` };
  const by = Math.abs(100 * skill).toFixed(1);
  const rivals = 'than holding the newest frame or the mean frame, whichever is the better';
  if (skill >= LEAST_SKILL)
    return {
      hasSkill: true,
      skill,
      sentence: `${states} forecast held-out frames with ${by} % less squared error ${rivals}.`,
    };
  const words =
    skill >= 0
      ? `no better ${rivals}: what they tell of the scene is not what moves it.`
      : `with ${by} % more squared error ${rivals}.`;
  return { hasSkill: false, skill, sentence: `${states} forecast held-out frames ${words} Do not build on them.` };
}
