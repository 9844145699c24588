/**
 * The survey as people read it in a terminal: a table with a line of data presence a signal, then the findings.
 */
import { textTable } from '../text-table.ts';
import { figure, lengthOf, percent } from './finding.ts';
import { suggestionsText } from './suggestions.ts';
import type { Survey, SurveyedSignal } from './survey.ts';

const HEAD = [
  'signal',
  'unit',
  'readings',
  'missing',
  'every',
  'step',
  'least',
  'median',
  'greatest',
  'presence over time',
];
const BARS = '·▁▂▃▄▅▆▇█';
const WIDTH = 100;

/** One letter a part of the history: a dot where nothing is there, a full bar where every tick has a reading. */
function sparkline(presence: readonly number[]): string {
  return presence
    .map((share) => (share <= 0 ? BARS[0] : BARS[Math.min(8, Math.max(1, Math.floor(share * 8)))]))
    .join('');
}

/** Folds a sentence to the width of a terminal, later lines set in. */
function folded(text: string, indent: string): string {
  const lines: string[] = [];
  let line = '';
  for (const word of text.split(' ')) {
    if (line !== '' && indent.length + line.length + 1 + word.length > WIDTH) {
      lines.push(line);
      line = word;
    } else line = line === '' ? word : `${line} ${word}`;
  }
  return [...lines, line].join(`\n${indent}`);
}

function orDash(value: number | null, say: (value: number) => string): string {
  return value === null ? '-' : say(value);
}

function signalRow(signal: SurveyedSignal): string[] {
  return [
    signal.role === 'input' ? `${signal.name} (input)` : signal.name,
    signal.unit,
    String(signal.readings),
    percent(signal.missingShare),
    orDash(signal.intervalS, (s) => lengthOf(s * 1000)),
    `${figure(signal.lattice.step)}${signal.lattice.offset === 0 ? '' : ` + ${figure(signal.lattice.offset)}`}`,
    orDash(signal.least, figure),
    orDash(signal.median, figure),
    orDash(signal.greatest, figure),
    sparkline(signal.presence),
  ];
}

const SIGNS = { serious: '!!', look: '! ', note: '  ' } as const;

/** The whole survey as text, ending with a line break. */
export function surveyText(survey: Survey): string {
  const rows = survey.files.reduce((sum, file) => sum + file.rows, 0);
  const kinds = [...new Set(survey.files.map((file) => `${file.format}, ${file.timeKind ?? 'no times'}`))].join('; ');
  const lines = [
    `Survey of ${survey.site}: ${survey.files.length === 1 ? 'one file' : `${survey.files.length} files`} (${kinds}), ${rows} rows`,
    `${survey.from} to ${survey.to}, ${survey.ticks} ticks of ${lengthOf(survey.tickS * 1000)}${survey.suggestedTickS === survey.tickS ? '' : ` (the readings suggest ${lengthOf(survey.suggestedTickS * 1000)})`}${survey.zone === null ? '' : `, times without zone read as ${survey.zone}`}`,
    '',
    textTable(HEAD, survey.signals.map(signalRow), [2, 3, 4, 5, 6, 7, 8], ''),
    '',
  ];
  if (survey.findings.length === 0) lines.push('Nothing found that needs a word.');
  else lines.push(`Findings (${survey.findings.length}; !! spoils a fit, ! look at it):`);
  for (const { weight, sentence, advice } of survey.findings)
    lines.push(` ${SIGNS[weight]} ${folded(advice === 'Nothing to do.' ? sentence : `${sentence} ${advice}`, '    ')}`);
  if (survey.suggestions.length > 0)
    lines.push(
      '',
      folded(
        'Perhaps not to be learned from. Where it was maintenance or a fault, paste the entry into the site file and write down why; a flood or a frost should teach. Nothing is left out by itself.',
        '',
      ),
      suggestionsText(survey.suggestions, '  '),
    );
  return `${lines.join('\n')}\n`;
}
