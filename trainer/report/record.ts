/** The record at the end of a report: what the model learned from, what was tried, what rounding cost. */
import type { FitResult } from '../pipeline.ts';
import { bytesText, spanText } from '../text-table.ts';
import { escapeHtml, moment, percent, plainNumber, table } from './markup.ts';

/** Whether the bundle holds more than what was judged. */
export function isLearnedAgain({ bundle, learn }: FitResult): boolean {
  return bundle.provenance.lastMs >= learn.toTick * bundle.tickMs;
}

/** Kinds tried, where there was more than one. */
function triedRows({ chosen }: FitResult): string[][] {
  if (chosen.tried.length < 2) return [];
  const rows = chosen.tried.map(({ kind, name, bytes, error }) => {
    const off = error === 1 ? 'the measure' : `squared error ${error < 1 ? '' : '+'}${percent(error - 1)}`;
    const words = `${kind}: ${escapeHtml(name)}, ${bytesText(bytes)}, ${off}`;
    return kind === chosen.kind ? `<strong>${words}</strong>` : words;
  });
  return [['kinds tried, on the calibration part', rows.join('<br>')]];
}

/** The table. */
export function record(result: FitResult): string {
  const { bundle, chosen, audit, learn, calibrate, earlier } = result;
  const tick = bundle.tickMs;
  const again = `${moment(bundle.provenance.firstMs)} to ${moment(bundle.provenance.lastMs + tick)}`;
  const hex = (bytes: Uint8Array): string => Buffer.from(bytes).toString('hex');
  return table(
    ['', ''],
    [
      ['learned from', `${moment(learn.fromTick * tick)} to ${moment(learn.toTick * tick)}`],
      ...(earlier === null
        ? []
        : [
            [
              'and by their factors from',
              `${moment(earlier.fromTick * tick)} to ${moment(earlier.toTick * tick)}, ${earlier.ticks} ticks`,
            ],
          ]),
      ...(isLearnedAgain(result) ? [['after judging, once more from', again]] : []),
      ['penalties and bounds from', `${moment(calibrate.fromTick * tick)} to ${moment(calibrate.toTick * tick)}`],
      ['model', `${chosen.kind} kind: ${escapeHtml(chosen.name)}`],
      ...triedRows(result),
      ['period', chosen.periodTicks > 0 ? spanText(chosen.periodTicks * tick) : 'none'],
      ...(bundle.round === undefined ? [] : [['round taken away', spanText(bundle.round.ticks * tick)]]),
      ['rounding to integers cost', `${plainNumber(100 * (audit.ratio - 1))} % of the squared error`],
      ['history digest', `<code>${hex(bundle.provenance.historyDigest)}</code>`],
      ['survey digest', `<code>${hex(bundle.provenance.surveyDigest)}</code>`],
      ['options', `<code>${escapeHtml(bundle.provenance.options)}</code>`],
    ],
  );
}
