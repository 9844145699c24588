/** What sizing found, for people: one sentence, then a table. */
import { momentText, textTable } from '../text-table.ts';
import type { CondenseSize, FramesSize } from './frames-size.ts';
import type { Extent } from './history-extent.ts';
import type { FitPrediction } from './predict-fit.ts';

const UNITS = ['B', 'kB', 'MB', 'GB', 'TB', 'PB', 'EB'] as const;

/** Bytes in powers of ten, as memory and disks are sold: "64.8 GB". */
export function sizeText(bytes: number): string {
  let value = bytes;
  let unit = 0;
  while (value >= 999.5 && unit < UNITS.length - 1) {
    value /= 1000;
    unit++;
  }
  const digits = unit === 0 || value >= 100 ? 0 : value >= 10 ? 1 : 2;
  return `${value.toFixed(digits)} ${UNITS[unit]}`;
}

/** A count with thousands parted. */
export function countText(count: number): string {
  return count.toLocaleString('en');
}

/** A time that nobody should read more into than it holds. */
export function durationText(seconds: number): string {
  if (seconds < 10) return `${seconds.toFixed(1)} s`;
  if (seconds < 120) return `${Math.round(seconds)} s`;
  if (seconds < 7200) return `${Math.round(seconds / 60)} min`;
  return `${(seconds / 3600).toFixed(1)} h`;
}

/** A fit. */
export function fitText(site: string, extent: Extent, fit: FitPrediction, freeBytes: number): string {
  const { shape, way, peakBytes, seconds, bundleBytes, maxBundleBytes, factorsBytes, covariance, gram } = fit;
  const { signals, inputs, horizon, recentTicks, olderTicks, features } = shape;
  const about = extent.isExact ? '' : 'about ';
  const fits = peakBytes <= freeBytes ? `${sizeText(freeBytes)} are free` : `only ${sizeText(freeBytes)} are free`;
  const rows = [
    [
      'history',
      `${about}${countText(extent.rows)} rows in ${countText(extent.files)} file(s), ${sizeText(extent.bytes)}`,
    ],
    ['', `${momentText(extent.fromMs)} to ${momentText(extent.toMs)}: ${about}${countText(extent.ticks)} ticks`],
    ['site', `${signals} signals, ${inputs} inputs, horizon ${horizon} ticks; up to ${features} features a channel`],
    [
      'way',
      way === 'in memory'
        ? 'in memory, all of it'
        : `the newest ${countText(recentTicks)} ticks in memory, ${countText(olderTicks)} older ones stream past`,
    ],
    ['peak memory', `${sizeText(peakBytes)} (${fits})`],
    [
      'time',
      `${durationText(seconds)} on this machine as it is now; longer where a kind beside the linear one is worth trying`,
    ],
    [
      'bundle',
      `about ${sizeText(bundleBytes)} where signals share what they remember, up to ${sizeText(maxBundleBytes)} where each needs its own`,
    ],
    ...(factorsBytes === null ? [] : [['factors', `${sizeText(factorsBytes)}, however long the history`]]),
    ['never formed', `covariance of the features, ${matrixText(covariance)}`],
    ['', `Gram matrix of the windows, ${matrixText(gram)}`],
  ];
  const sentence =
    `${site}: ${about}${countText(extent.ticks)} ticks of ${signals + inputs} channels, fitted ${way === 'in memory' ? 'in memory' : 'as they stream past'}: ` +
    `about ${durationText(seconds)} and ${sizeText(peakBytes)}${peakBytes > freeBytes ? ', which is more than is free' : ''}.`;
  return `${sentence}\n\n${textTable(['', 'foreseen'], rows)}\n`;
}

/** Wide observations. */
export function framesText(size: FramesSize, condense: CondenseSize, freeBytes: number): string {
  const { frames, frameLength, window, windows, features, windowBytes, covariance, gram } = size;
  const worst = Math.min(covariance.bytes, gram.bytes);
  const rows = [
    ['frames', `${countText(frames)} of ${countText(frameLength)} numbers`],
    [
      'windows',
      `${countText(windows)} of ${countText(window)} frame(s): ${countText(features)} numbers each, ${sizeText(windowBytes)}`,
    ],
    [
      'condense',
      `${sizeText(condense.peakBytes)} at its peak, frames projected to ${condense.numbers} numbers, rank ${condense.rank}`,
    ],
    ['never formed', `covariance of the numbers, ${matrixText(covariance)}`],
    ['', `Gram matrix of the windows, ${matrixText(gram)}`],
  ];
  const sentence =
    `${countText(windows)} windows of ${countText(features)} numbers: the smaller of covariance and Gram matrix would take ` +
    `${sizeText(worst)}${worst > freeBytes ? `, and ${sizeText(freeBytes)} are free` : ''}; neither is formed.`;
  return `${sentence}\n\n${textTable(['', 'foreseen'], rows)}\n`;
}

function matrixText({ rows, entries, bytes }: FitPrediction['gram']): string {
  return `${countText(rows)} x ${countText(rows)}: ${entries < 1e6 ? countText(entries) : entries.toExponential(2)} entries, ${sizeText(bytes)}`;
}

/** Whether the fast loops are there. */
export function kernelText(isSimd: boolean): string {
  return isSimd
    ? 'This machine has WebAssembly SIMD, so the fast kernels are used.\n'
    : 'This machine has no WebAssembly SIMD: the same loops run in plain numbers, with the same results, several times slower than foreseen.\n';
}
