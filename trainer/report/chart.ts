/**
 * Charts as inline SVG text, drawn without a browser so that a report is one file that opens anywhere, offline.
 */
import * as Plot from '@observablehq/plot';
import { parseHTML } from 'linkedom/worker';

/** Colours that stay apart for colour-blind readers and in print (Okabe and Ito, 2008, Color Universal Design). */
export const palette = {
  ours: '#0072b2',
  reading: '#000000',
  band: '#56b4e9',
  rivals: ['#999999', '#e69f00', '#cc79a7', '#009e73', '#d55e00', '#f0e442'],
  nominal: '#d55e00',
} as const;

/** Size, axes and marks of one chart, as the plotting library takes them. */
export type ChartOptions = Plot.PlotOptions;

const { document } = parseHTML('<!doctype html><html><body></body></html>');

/**
 * Draws one chart.
 *
 * units   width and height in CSS pixels; the picture scales down with the page
 * throws  what the plotting library throws on marks it cannot draw
 */
export function chart(options: ChartOptions, description: string): string {
  const figure = Plot.plot({
    ...options,
    document: document as unknown as NonNullable<ChartOptions['document']>,
    style: { fontSize: '11px', fontFamily: 'inherit' },
    ariaLabel: description,
  });
  return figure.outerHTML;
}
