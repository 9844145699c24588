/** /metrics as OpenMetrics text: our writer against a checker, and that checker against the reference parser. */
import { spawnSync } from 'node:child_process';
import type { HealthMessage } from '@stillwell/protocol';
import { afterEach, expect, test } from 'vitest';
import { Exposition } from '../../../runtime/page/exposition.ts';
import { counters, METRICS_TYPE } from '../../../runtime/page/metrics.ts';
import { testFolder } from '../../support/folder.ts';
import { parseOpenMetrics } from '../../support/openmetrics.ts';
import { openStage, type PageStage } from '../../support/page-stage.ts';

/** Reference parser of the format: Debian's python3-prometheus-client (0.16.0 on Debian 12), prometheus_client.openmetrics.parser. */
const PARSE = `
import sys
from prometheus_client.openmetrics.parser import text_string_to_metric_families
for family in text_string_to_metric_families(sys.stdin.read()):
    for sample in family.samples:
        print(family.type, sample.name, sorted(sample.labels.items()), float(sample.value), sep='|')
`;
const hasReference = spawnSync('/usr/bin/python3', ['-c', 'import prometheus_client.openmetrics.parser']).status === 0;
const withReference = hasReference ? test : test.skip;

let stage: PageStage | null = null;
afterEach(async () => {
  await stage?.stop();
  stage = null;
});

async function metricsOf(url: string): Promise<string> {
  const answer = await fetch(`${url}metrics`);
  expect(answer.status).toBe(200);
  expect(answer.headers.get('content-type')).toBe(METRICS_TYPE);
  return answer.text();
}

/** The one sample of a name and some labels. */
function sampleValue(text: string, name: string, labels: Readonly<Record<string, string>> = {}): number {
  const found = parseOpenMetrics(text)
    .flatMap((family) => family.samples)
    .filter((one) => one.name === name && Object.entries(labels).every(([key, value]) => one.labels[key] === value));
  expect(found, `${name} ${JSON.stringify(labels)}`).toHaveLength(1);
  return found[0]!.value;
}

test('before a bundle and after one, every line obeys the format and says what is so', async () => {
  stage = await openStage({ data: testFolder(), signals: 3, input: true });
  const before = await metricsOf(stage.url);
  expect(sampleValue(before, 'stillwell_status', { stillwell_status: 'no-bundle' })).toBe(1);
  expect(sampleValue(before, 'stillwell_quality', { stillwell_quality: 'F' })).toBe(1);
  expect(sampleValue(before, 'stillwell_forecasts_total')).toBe(0);
  stage.load();
  await stage.play(0, 20);
  await stage.play(20, 26, 's2');
  await stage.plant.publish({ topic: 'plant/s1', payload: 'wet', qos: 1, retain: false });
  await expect
    .poll(async () => sampleValue(await metricsOf(stage!.url), 'stillwell_refused_total', { cause: 'syntax' }))
    .toBe(1);
  const text = await metricsOf(stage.url);
  expect(sampleValue(text, 'stillwell_ticks_total')).toBe(26);
  expect(sampleValue(text, 'stillwell_status', { stillwell_status: 'running' })).toBe(1);
  expect(sampleValue(text, 'stillwell_signal_quality', { signal: 's2', stillwell_signal_quality: 'M' })).toBe(1);
  expect(sampleValue(text, 'stillwell_signal_quality', { signal: 's1', stillwell_signal_quality: 'good' })).toBe(1);
  // The newest reading is the pump's, 31 s into tick 26; the last of s2 came in tick 19, 510 ms into it.
  expect(sampleValue(text, 'stillwell_signal_reading_age_seconds', { signal: 's2' })).toBeCloseTo(
    7 * 60 + 31 - 0.51,
    6,
  );
  expect(sampleValue(text, 'stillwell_forecasts_total') % 3).toBe(0);
  expect(sampleValue(text, 'stillwell_bundle_info', { sequence: '1', kind: 'linear' })).toBe(1);
  expect(sampleValue(text, 'stillwell_limit_probability_ratio', { signal: 's1', limit: 'high' })).toBeLessThanOrEqual(
    1,
  );
  expect(sampleValue(text, 'stillwell_connected')).toBe(1);
  // The loop's pulse comes every half second.
  await expect
    .poll(async () => sampleValue(await metricsOf(stage!.url), 'stillwell_loop_delay_seconds_count'), { timeout: 5000 })
    .toBeGreaterThan(0);
  expect(sampleValue(text, 'process_resident_memory_bytes')).toBeGreaterThan(1e6);
});

test('counters never fall from one answer to the next', async () => {
  stage = await openStage({ data: testFolder() });
  stage.load();
  await stage.play(0, 10);
  const counters = (text: string) =>
    parseOpenMetrics(text)
      .filter(({ type }) => type === 'counter')
      .flatMap(({ samples }) =>
        samples.map(({ name, labels, value }) => [name + JSON.stringify(labels), value] as const),
      );
  const before = new Map(counters(await metricsOf(stage.url)));
  await stage.play(10, 20);
  const after = new Map(counters(await metricsOf(stage.url)));
  expect(before.size).toBeGreaterThan(10);
  for (const [key, value] of before) expect(after.get(key), key).toBeGreaterThanOrEqual(value);
});

test('what may fall again is a gauge, by signal where health has it so', () => {
  const out = new Exposition();
  const counts = {
    ticks: 9,
    segment_bytes_a_day: 1200,
    budget_exceeded: 0,
    resolution_shed: { level: 4 },
    refused: { syntax: 2 },
  };
  counters(out, { counters: counts } as unknown as HealthMessage);
  const families = parseOpenMetrics(out.end()).map(({ type, samples }) => [
    type,
    samples[0]!.name,
    samples[0]!.labels,
    samples[0]!.value,
  ]);
  expect(families).toEqual([
    ['counter', 'stillwell_ticks_total', {}, 9],
    ['gauge', 'stillwell_segment_bytes_a_day', {}, 1200],
    ['gauge', 'stillwell_budget_exceeded', {}, 0],
    ['gauge', 'stillwell_resolution_shed', { signal: 'level' }, 4],
    ['counter', 'stillwell_refused_total', { cause: 'syntax' }, 2],
  ]);
});

const FAULTS: readonly (readonly [string, string])[] = [
  ['no end', '# TYPE a gauge\na 1\n'],
  ['an end in the middle', '# TYPE a gauge\n# EOF\na 1\n# EOF\n'],
  ['a counter without _total', '# TYPE a counter\na 1\n# EOF\n'],
  ['a counter below zero', '# TYPE a counter\na_total -1\n# EOF\n'],
  ['a unit that is not in the name', '# TYPE a gauge\n# UNIT a seconds\na 1\n# EOF\n'],
  ['a quote not escaped', '# TYPE a gauge\na{b="c"d"} 1\n# EOF\n'],
  ['families interleaved', '# TYPE a gauge\na 1\n# TYPE b gauge\nb 1\n# TYPE a gauge\n# EOF\n'],
  ['a sample twice', '# TYPE a gauge\na{b="c"} 1\na{b="c"} 2\n# EOF\n'],
  ['a state without its label', '# TYPE a stateset\na{b="c"} 1\n# EOF\n'],
  ['an info of 2', '# TYPE a info\na_info{b="c"} 2\n# EOF\n'],
  ['a name with a dash', '# TYPE a-b gauge\na-b 1\n# EOF\n'],
];

test.each(FAULTS)('the checker refuses %s', (_, text) => {
  expect(() => parseOpenMetrics(text)).toThrow();
});

test('labels and help of any text come back as they were', () => {
  const out = new Exposition();
  const odd = 'a "quoted" \\ back\nslash, {brace} = 1';
  out.gauge({ name: 'a', help: odd }, [[{ label: odd }, 1.5]]);
  const [family] = parseOpenMetrics(out.end());
  expect(family!.samples[0]).toEqual({ name: 'a', labels: { label: odd }, value: 1.5 });
});

withReference('the reference parser reads the same samples, and refuses the same faults', async () => {
  stage = await openStage({ data: testFolder(), signals: 3, input: true });
  stage.load();
  await stage.play(0, 20);
  const text = await metricsOf(stage.url);
  const run = (input: string) => spawnSync('/usr/bin/python3', ['-c', PARSE], { input, encoding: 'utf8' });
  const read = run(text);
  expect(read.stderr).toBe('');
  const theirs = read.stdout
    .trim()
    .split('\n')
    .map((line) => line.split('|'));
  const ours = parseOpenMetrics(text).flatMap((family) =>
    family.samples.map((sample) => [family.type, sample.name, sample.value]),
  );
  expect(theirs.map(([type, name, , value]) => [type, name, Number(value)])).toEqual(ours);
  // That one it lets pass, though the specification forbids it.
  for (const [what, fault] of FAULTS) if (what !== 'a sample twice') expect(run(fault).status, what).not.toBe(0);
});
