/**
 * Checks a text against OpenMetrics 1.0 and takes its samples apart. Written from the specification (OpenMetrics, version 1.0.0,
 * 2020; sections "Text format: ABNF", "Overall structure", "Escaping", and the rules of each metric type), for what is at
 * hand from memory of that text; `metrics.test.ts` holds it against the reference parser where that is installed.
 */

/** One line that is not metadata. */
export interface MetricSample {
  readonly name: string;
  readonly labels: Readonly<Record<string, string>>;
  readonly value: number;
}

/** A family with its metadata. */
export interface MetricFamily {
  readonly name: string;
  type: string;
  unit: string;
  help: string;
  readonly samples: MetricSample[];
}

/** metricname = metricname-initial-char 0*metricname-char */
const NAME = '[a-zA-Z_:][a-zA-Z0-9_:]*';
const LABEL = '[a-zA-Z_][a-zA-Z0-9_]*';
/** escaped-string = *(normal-char / BS DQUOTE / BS "n" / BS BS) */
const TEXT = String.raw`(?:[^\n"\\]|\\["n\\])*`;
/** realnumber, infinities and NaN. */
const NUMBER = String.raw`[+-]?(?:\d+(?:\.\d*)?(?:[eE][+-]?\d+)?|\.\d+(?:[eE][+-]?\d+)?|[iI]nf(?:inity)?)|[nN]a[nN]`;
const SAMPLE = new RegExp(`^(${NAME})(?:\\{((?:${LABEL}="${TEXT}"(?:,${LABEL}="${TEXT}")*)?)\\})? (${NUMBER})$`);
const META = new RegExp(`^# (TYPE|UNIT|HELP) (${NAME}) (.*)$`);
const TYPES = ['counter', 'gauge', 'histogram', 'gaugehistogram', 'stateset', 'info', 'summary', 'unknown'];
/** Suffixes that the samples of a type may have. */
const SUFFIXES: Readonly<Record<string, readonly string[]>> = {
  counter: ['_total', '_created'],
  gauge: [''],
  stateset: [''],
  info: ['_info'],
  summary: ['_count', '_sum', '_created', ''],
  unknown: [''],
};

/** Reads a text. throws  Error that names the line and the rule it breaks */
export function parseOpenMetrics(text: string): MetricFamily[] {
  if (!text.endsWith('# EOF\n')) throw new Error('the last line must be "# EOF" with a line feed');
  const lines = text.slice(0, -'# EOF\n'.length).split('\n');
  if (lines.pop() !== '') throw new Error('"# EOF" must stand on a line of its own');
  const families: MetricFamily[] = [];
  const seen = new Set<string>();
  lines.forEach((line, k) => {
    const fail = (why: string): never => {
      throw new Error(`line ${k + 1}: ${why}: ${line}`);
    };
    const meta = META.exec(line);
    if (meta === null) {
      families.at(-1)?.samples.push(sampleOf(line, families.at(-1)!, seen, fail));
      if (families.length === 0) fail('a sample without a family');
      return;
    }
    const [, what, name, rest] = meta as unknown as [string, string, string, string];
    const family = familyOf(name, families, fail);
    if (family.samples.length > 0) fail('metadata behind samples');
    if (what === 'TYPE') {
      if (family.type !== '') fail('a second type');
      if (!TYPES.includes(rest)) fail('no such type');
      family.type = rest;
    } else if (what === 'UNIT') {
      if (family.unit !== '') fail('a second unit');
      if (rest !== '' && !name.endsWith(`_${rest}`)) fail('the name must end with the unit');
      family.unit = rest;
    } else {
      if (family.help !== '') fail('a second help');
      if (!new RegExp(`^${TEXT}$`).test(rest)) fail('help not escaped');
      family.help = rest;
    }
  });
  for (const { name, type, unit } of families) {
    if (type === '') throw new Error(`${name}: no type`);
    if ((type === 'info' || type === 'stateset') && unit !== '') throw new Error(`${name}: ${type} has no unit`);
    if (type === 'counter' && name.endsWith('_total'))
      throw new Error(`${name}: a counter's family is named without _total`);
  }
  return families;
}

/** Families must not be interleaved: metadata of one that came before is a fault. */
function familyOf(name: string, families: MetricFamily[], fail: (why: string) => never): MetricFamily {
  const last = families.at(-1);
  if (last?.name === name) return last;
  if (families.some((one) => one.name === name)) fail('the family came before');
  const family: MetricFamily = { name, type: '', unit: '', help: '', samples: [] };
  families.push(family);
  return family;
}

function sampleOf(line: string, family: MetricFamily, seen: Set<string>, fail: (why: string) => never): MetricSample {
  const match = SAMPLE.exec(line);
  if (match === null) return fail('not a sample');
  const [, name, inside = '', number] = match as unknown as [string, string, string | undefined, string];
  const labels: Record<string, string> = {};
  for (const [, label, value] of inside.matchAll(new RegExp(`(${LABEL})="(${TEXT})"`, 'g'))) {
    if (label! in labels) fail('a label twice');
    labels[label!] = value!.replace(/\\(["n\\])/g, (_, c: string) => (c === 'n' ? '\n' : c));
  }
  const suffix = name.startsWith(family.name) ? name.slice(family.name.length) : null;
  if (suffix === null || !(SUFFIXES[family.type] ?? []).includes(suffix)) fail(`not a sample of a ${family.type}`);
  const key = `${name}${JSON.stringify(Object.entries(labels).sort())}`;
  if (seen.has(key)) fail('the same sample twice');
  seen.add(key);
  const value = Number(number.replace(/inf(inity)?/i, 'Infinity'));
  if (family.type === 'counter' && !(value >= 0)) fail('a counter below zero');
  if (family.type === 'info' && value !== 1) fail('info is 1');
  if (family.type === 'stateset' && (labels[family.name] === undefined || (value !== 0 && value !== 1)))
    fail('a state is named by its label, and 0 or 1');
  return { name, labels, value };
}
