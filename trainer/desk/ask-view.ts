/** An answer for a terminal: for each signal both forecasts on one scale, and what either says of the limits. */
import { ADVISORY, type AnswerMessage } from '@stillwell/protocol';
import { momentText, printable, shortNumber, spanText } from '../text-table.ts';
import { bandPlot, rangeOf } from './band-plot.ts';

type AnsweredSignal = NonNullable<AnswerMessage['signals']>[number];
type AnsweredPaths = AnsweredSignal['present'];

const PLOT_ROWS = 5;

/** Lines of an answer that is no refusal; `columns` of the terminal decide how wide the plots are. */
export function answerText(answer: AnswerMessage, columns: number): string {
  const { signals = [], tick_s = 0, origin = '' } = answer;
  const quality =
    answer.quality === undefined ? '' : `, quality ${answer.quality} (${printable(answer.quality_reason ?? '')})`;
  const head = `${answer.site}: bundle number ${answer.sequence}, origin ${momentText(Date.parse(origin))}${quality}`;
  const inputs = (answer.inputs_ahead ?? []).map(({ input, use }) => `${printable(input)} ${use}`).join(', ');
  const width = Math.max(10, Math.min(72, columns - 16));
  return [
    head,
    `inputs in the answer: ${inputs}`,
    ...signals.flatMap((signal) => signalBlock(signal, tick_s * 1000, width)),
    '',
    ADVISORY,
  ].join('\n');
}

function signalBlock(signal: AnsweredSignal, tickMs: number, width: number): string[] {
  const { present, unit } = signal;
  const scale = rangeOf([...signal.lower, ...signal.upper, ...present.lower, ...present.upper]);
  return [
    '',
    `${printable(signal.signal)}${unit === '1' ? '' : ` in ${printable(unit)}`}`,
    ...part('asked', signal, tickMs, width, scale),
    ...part('as it stands', present, tickMs, width, scale),
  ];
}

function part(
  title: string,
  paths: AnsweredPaths,
  tickMs: number,
  width: number,
  scale: { readonly low: number; readonly high: number },
): string[] {
  const steps = shownSteps(paths.median.length).map((step) => {
    const [median, lower, upper] = [paths.median, paths.lower, paths.upper].map((path) => shortNumber(path[step - 1]));
    return `+${spanText(step * tickMs)} ${median} [${lower} .. ${upper}]`;
  });
  const axis = (row: number): string =>
    row === 0 ? shortNumber(scale.high) : row === PLOT_ROWS - 1 ? shortNumber(scale.low) : '';
  const plot = bandPlot(paths, width, PLOT_ROWS, scale).map((line, row) => `${axis(row).padStart(12)} ${line}`);
  const limits = paths.limits
    .filter(({ probability }) => probability >= 0.01)
    .map(
      ({ limit, value, probability }) =>
        `${limit.replace('_', '-')} ${shortNumber(value)}: ${Math.round(100 * probability)} %`,
    );
  return [
    `  ${title}: ${steps.join('   ')}`,
    ...plot,
    ...(limits.length === 0 ? [] : [`  crosses ${limits.join(', ')}`]),
  ];
}

/** The middle and the end. */
function shownSteps(steps: number): number[] {
  return [...new Set([1, Math.max(1, Math.round(steps / 2)), steps])];
}
