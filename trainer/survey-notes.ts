/**
 * What the survey found that a person should hear when fitting, not only when surveying: what makes a model worse or its
 * figures mean something else. The rest stands in survey.json and the report.
 */
import { counted } from './history/finding.ts';
import type { Survey } from './history/survey.ts';

/** A log with more such findings wants `stillwell survey` first. */
const MOST = 8;

/** Sentences, the weightiest findings first; signals with the same trouble each have their own. */
export function surveyNotes(survey: Survey): string[] {
  const weighty = survey.findings.filter(
    ({ kind, weight }) => weight === 'serious' || (weight === 'look' && kind !== 'resolution'),
  );
  const said = weighty.slice(0, MOST).map(({ sentence, advice }) => `${sentence} ${advice}`);
  const more = weighty.length - said.length;
  return [
    ...said,
    ...(more > 0
      ? [`The survey has ${counted(more, 'more finding')} to look at: see survey.json, or run stillwell survey.`]
      : []),
    ...(survey.suggestions.length > 0
      ? [
          `The survey suggests ${counted(survey.suggestions.length, 'stretch').replace('stretchs', 'stretches')} of time that perhaps should not teach; nothing was left out for it. See stillwell survey.`,
        ]
      : []),
  ];
}
