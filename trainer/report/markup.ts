/**
 * Small pieces of HTML: escaping, tables, numbers as people read them.
 */

/** Text made safe for element content and quoted attributes. */
export function escapeHtml(text: string): string {
  return text
    .replaceAll('&', '&amp;')
    .replaceAll('<', '&lt;')
    .replaceAll('>', '&gt;')
    .replaceAll('"', '&quot;')
    .replaceAll("'", '&#39;');
}

/** Three significant digits, never in exponent form between 0.001 and 100,000; a dash where there is no number. */
export function plainNumber(value: number): string {
  if (!Number.isFinite(value)) return '–';
  const size = Math.abs(value);
  if (size !== 0 && (size < 0.001 || size >= 100_000)) return value.toExponential(1);
  return size >= 100 ? value.toFixed(0) : String(Number(value.toPrecision(3)));
}

/** A share as a percentage without decimals; a dash where there is no number. */
export function percent(share: number): string {
  return Number.isFinite(share) ? `${Math.round(share * 100)} %` : '–';
}

/** A unit as people read it: nothing for what has none, which UCUM writes as 1. */
export function unitText(unit: string): string {
  return unit === '1' ? '' : unit;
}

/** Words with their unit in brackets, where there is one. */
export function withUnit(words: string, unit: string): string {
  return unitText(unit) === '' ? words : `${words} (${unit})`;
}

/** A moment in UTC to the minute. */
export function moment(ms: number): string {
  return `${new Date(ms).toISOString().slice(0, 16).replace('T', ' ')} UTC`;
}

/** A table; cells are HTML already escaped. */
export function table(head: readonly string[], rows: readonly (readonly string[])[], className = ''): string {
  const cells = (row: readonly string[], tag: string): string => row.map((cell) => `<${tag}>${cell}</${tag}>`).join('');
  const body = rows.map((row) => `<tr>${cells(row, 'td')}</tr>`).join('\n');
  return `<div class="wide"><table class="${className}"><thead><tr>${cells(head, 'th')}</tr></thead><tbody>\n${body}\n</tbody></table></div>`;
}
