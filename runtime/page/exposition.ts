/**
 * Metrics as text in the sense of OpenMetrics 1.0 (specification of 2020, "Text format"): families one after another, each
 * with its type, unit and help, its samples together, and `# EOF` at the end. Only what we publish: counters, gauges, info,
 * state sets and summaries of a sum and a count.
 */

/** Labels of a sample, in the order they are written. */
export type Labels = Readonly<Record<string, string>>;

/** A sample's labels and value. */
export type Sample = readonly [labels: Labels, value: number];

/** What a family of metrics is. */
export interface Family {
  readonly name: string;
  readonly help: string;
  /** The last part of the name, where it has a unit. */
  readonly unit?: string;
}

/** Writes families; see the file head. */
export class Exposition {
  #text = '';

  counter(family: Family, samples: readonly Sample[]): void {
    this.#family('counter', family);
    for (const [labels, value] of samples) this.#sample(`${family.name}_total`, labels, value);
  }

  gauge(family: Family, samples: readonly Sample[]): void {
    if (samples.length === 0) return;
    this.#family('gauge', family);
    for (const [labels, value] of samples) this.#sample(family.name, labels, value);
  }

  info(family: Family, labels: Labels): void {
    this.#family('info', family);
    this.#sample(`${family.name}_info`, labels, 1);
  }

  /** Every state of each, 1 where it holds. */
  states(family: Family, states: readonly string[], of: readonly (readonly [labels: Labels, state: string])[]): void {
    if (of.length === 0) return;
    this.#family('stateset', family);
    for (const [labels, holds] of of)
      for (const state of states)
        this.#sample(family.name, { ...labels, [family.name]: state }, state === holds ? 1 : 0);
  }

  summary(family: Family, count: number, sum: number): void {
    this.#family('summary', family);
    this.#sample(`${family.name}_count`, {}, count);
    this.#sample(`${family.name}_sum`, {}, sum);
  }

  /** The whole text. */
  end(): string {
    return `${this.#text}# EOF\n`;
  }

  #family(type: string, { name, help, unit }: Family): void {
    this.#text += `# TYPE ${name} ${type}\n`;
    if (unit !== undefined) this.#text += `# UNIT ${name} ${unit}\n`;
    this.#text += `# HELP ${name} ${escaped(help)}\n`;
  }

  #sample(name: string, labels: Labels, value: number): void {
    const inside = Object.entries(labels).map(([label, text]) => `${label}="${escaped(text)}"`);
    this.#text += `${name}${inside.length === 0 ? '' : `{${inside.join(',')}}`} ${value}\n`;
  }
}

function escaped(text: string): string {
  return text.replaceAll('\\', '\\\\').replaceAll('"', '\\"').replaceAll('\n', '\\n');
}
