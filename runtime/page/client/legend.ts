/** What the lines of the charts mean, once for all of them. */
import { el, shape } from './dom.ts';

/** The legend. */
export function legend(): HTMLElement {
  const list = el('ul', 'legend');
  const entries = [
    ['readings', 'M1 9 L9 5 L17 8 L25 4', 'reading'],
    ['median', 'M1 9 L25 4', 'forecast, with its bounds'],
    ['said-line', 'M1 9 L25 4', 'what was said before'],
    ['limit', 'M1 7 H25', 'limit'],
  ] as const;
  for (const [name, d, text] of entries) {
    const drawing = shape('svg', { width: 26, height: 14, viewBox: '0 0 26 14', 'aria-hidden': 'true', class: 'key' });
    const band = { median: 'band', 'said-line': 'said', readings: '', limit: '' }[name];
    if (band !== '') drawing.append(shape('path', { class: band, d: 'M1 6 L25 0 L25 9 L1 13 Z' }));
    drawing.append(shape('path', { class: name, d }));
    list.append(el('li', '', drawing, text));
  }
  return list;
}
