/** What was heard, as a table for people and as plain data for programs. */
import type { HeardCause, HeardChannel, HeardReading, HeardSite } from '../ingest/heard.ts';

const MOST_UNMATCHED = 20;
const DIGITS = 6;

/** As few digits as tell the value, without the noise of a conversion. */
const shownNumber = (value: number): string => String(Number(value.toPrecision(DIGITS)));

const shownAge = (ms: number): string => {
  const seconds = Math.abs(ms) / 1000;
  if (seconds < 120) return `${seconds.toFixed(1)} s`;
  if (seconds < 7200) return `${(seconds / 60).toFixed(0)} min`;
  return seconds < 172_800 ? `${(seconds / 3600).toFixed(0)} h` : `${(seconds / 86_400).toFixed(0)} d`;
};

/** A clock this much ahead of ours is ahead; less is the way of a message. */
const AHEAD_MS = 1000;

const timeText = ({ timeMs, arrivedMs, isKept }: HeardReading, nowMs: number): string => {
  const age = nowMs - (timeMs ?? arrivedMs);
  const text = age < -AHEAD_MS ? `${shownAge(age)} ahead` : `${shownAge(Math.max(0, age))} ago`;
  return `${text}, ${timeMs === null ? 'by arrival' : 'own time'}${isKept ? ', kept by the broker' : ''}`;
};

const countText = ({ role, readings }: HeardChannel, seconds: number): string => {
  if (readings === 0) return '-';
  if (role === 'plan' || seconds <= 0) return String(readings);
  const rate = readings / seconds;
  return rate >= 1
    ? `${readings}, ${shownNumber(Number(rate.toFixed(1)))}/s`
    : `${readings}, every ${shownAge(1000 / rate)}`;
};

const topicText = (channel: HeardChannel): string => {
  const { topic, topics } = channel;
  if (topics.size === 0) return topic ?? '-';
  const [first] = topics;
  return topics.size === 1 ? first! : `${topic}, ${topics.size} topics such as ${first}`;
};

const causes = (refused: ReadonlyMap<string, HeardCause>): string[] =>
  [...refused].map(([cause, { count, example }]) => `  refused ${count} × ${cause}: ${example}`);

const HEAD = ['', 'readings', 'last', 'time', 'topic'] as const;

const cellsOf = (channel: HeardChannel, seconds: number, nowMs: number): readonly string[] => {
  const { name, role, last, unit } = channel;
  return [
    role === 'plan' ? `plan of ${name}` : name,
    countText(channel, seconds),
    last === null ? '-' : `${shownNumber(last.value)} ${unit}`,
    last === null ? '-' : timeText(last, nowMs),
    topicText(channel),
  ];
};

/** Lines of the table, the refusals and hints below their signals, then what nobody takes. */
export function heardLines(heard: HeardSite, seconds: number, nowMs: number): readonly string[] {
  const channels = [...heard.channels, ...heard.plans];
  const cells = channels.map((channel) => cellsOf(channel, seconds, nowMs));
  const widths = HEAD.map((head, i) => Math.max(head.length, ...cells.map((row) => row[i]!.length)));
  const line = (row: readonly string[]): string =>
    row
      .map((text, i) => text.padEnd(widths[i]!))
      .join('  ')
      .trimEnd();
  const lines = [line(HEAD)];
  channels.forEach((channel, i) => {
    lines.push(line(cells[i]!), ...causes(channel.refused));
    const hint = channel.role === 'plan' ? heard.planHint(channel) : heard.hint(i);
    if (hint !== null) lines.push(`  ${hint}`);
  });
  return [...lines, ...unmatchedLines(heard)];
}

function unmatchedLines({ unmatched, moreTopics }: HeardSite): string[] {
  if (unmatched.size === 0) return [];
  const lines = ['', 'heard, and taken by no signal:'];
  const shown = [...unmatched].slice(0, MOST_UNMATCHED);
  for (const [topic, { count, example }] of shown) lines.push(`  ${topic}  ${count} × ${example}`);
  const rest = unmatched.size - shown.length;
  if (rest > 0 || moreTopics > 0) lines.push(`  and ${rest} topics more, ${moreTopics} messages on others`);
  return lines;
}

const causesData = (refused: ReadonlyMap<string, HeardCause>) =>
  [...refused].map(([cause, { count, example }]) => ({ cause, count, example }));

/** The same for `--json`. */
export function heardData(heard: HeardSite, seconds: number, nowMs: number): Record<string, unknown> {
  const channels = heard.channels.map((channel, i) => ({
    name: channel.name,
    role: channel.role,
    topic: channel.topic,
    topics: [...channel.topics],
    readings: channel.readings,
    per_second: seconds > 0 ? channel.readings / seconds : null,
    last: channel.last === null ? null : lastData(channel.last, channel.unit, nowMs),
    refused: causesData(channel.refused),
    hint: heard.hint(i),
  }));
  const plans = heard.plans.map((plan) => ({
    input: plan.name,
    topic: plan.topic,
    topics: [...plan.topics],
    plans: plan.readings,
    refused: causesData(plan.refused),
    hint: heard.planHint(plan),
  }));
  const unmatched = [...heard.unmatched].map(([topic, { count, example }]) => ({ topic, count, example }));
  return { heard: channels, plans, unmatched, unmatched_more: heard.moreTopics };
}

function lastData({ value, timeMs, arrivedMs, isKept }: HeardReading, unit: string, nowMs: number) {
  const at = timeMs ?? arrivedMs;
  return {
    value,
    unit,
    time: Math.abs(at) <= 8.64e15 ? new Date(at).toISOString() : null,
    time_source: timeMs === null ? 'arrival' : 'payload',
    age_s: (nowMs - at) / 1000,
    retained: isKept,
  };
}
