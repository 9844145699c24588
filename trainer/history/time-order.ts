/**
 * Times out of order and repeated. Both are accepted: readings are sorted, and what falls together into a tick is joined
 * by the signal's aggregate, where rows that repeat time and value count once in sums.
 */
import { counted, type Finding, iso, lengthOf } from './finding.ts';
import type { ChannelReadings } from './history.ts';

/** Steps back of about an hour look like a clock that was put back. */
const SET_BACK_MS = [25 * 60_000, 61 * 60_000] as const;

/** Share of steps back from which a file is written newest first; a shuffled one has about half of them. */
const NEWEST_FIRST = 0.9;

interface Steps {
  back: number;
  repeated: number;
  setBack: number;
  firstBackMs: number;
  firstRepeatMs: number;
  firstSetBackMs: number;
}

/** Steps of time in the order of the file. */
function stepsOf(channel: ChannelReadings, order: Uint32Array | null): Steps {
  const steps: Steps = { back: 0, repeated: 0, setBack: 0, firstBackMs: 0, firstRepeatMs: 0, firstSetBackMs: 0 };
  const { times } = channel;
  for (let i = 1; i < times.length; i++) {
    const step = (times[i] as number) - (times[i - 1] as number);
    if (step >= 0) continue;
    if (steps.back++ === 0) steps.firstBackMs = times[i] as number;
    if (-step >= SET_BACK_MS[0] && -step <= SET_BACK_MS[1] && steps.setBack++ === 0)
      steps.firstSetBackMs = times[i] as number;
  }
  let previous = Number.NaN;
  for (let n = 0; n < times.length; n++) {
    const time = times[order === null ? n : (order[n] as number)] as number;
    if (time === previous && steps.repeated++ === 0) steps.firstRepeatMs = time;
    previous = time;
  }
  return steps;
}

/** Findings of one array of times, for the signals that share it; `name` null when all do. */
export function timeOrderFindings(name: string | null, channel: ChannelReadings, order: Uint32Array | null): Finding[] {
  const steps = stepsOf(channel, order);
  const who = name === null ? 'The history' : name;
  const found: Finding[] = [];
  const at = (ms: number) => ({ signal: name, from: iso(ms), to: iso(ms) });
  const isNewestFirst = steps.back > NEWEST_FIRST * (channel.times.length - 1);
  if (steps.back > 0)
    found.push({
      kind: 'unordered',
      weight: isNewestFirst ? 'note' : 'look',
      ...at(steps.firstBackMs),
      count: steps.back,
      sentence: isNewestFirst
        ? `${who} is written newest first; it was sorted by time.`
        : `${who} goes back in time ${counted(steps.back, 'time')}, first to ${iso(steps.firstBackMs)}; it was sorted by time.`,
      advice: 'Nothing to do if the files were only given out of order; else look at the logger’s clock.',
    });
  if (steps.repeated > 0)
    found.push({
      kind: 'duplicates',
      weight: 'look',
      ...at(steps.firstRepeatMs),
      count: steps.repeated,
      sentence: `${who} repeats a time ${counted(steps.repeated, 'time')}, first at ${iso(steps.firstRepeatMs)}; they were joined by the aggregate, rows of equal value counted once in sums.`,
      advice: 'Check for files that overlap, or for a clock that was put back.',
    });
  if (steps.setBack > 0 && steps.setBack < 20 && steps.back < channel.times.length / 2)
    found.push({
      kind: 'clock-set-back',
      weight: 'serious',
      ...at(steps.firstSetBackMs),
      count: steps.setBack,
      sentence: `${who} steps back by about an hour ${counted(steps.setBack, 'time')}, first to ${iso(steps.firstSetBackMs)} (a step of up to ${lengthOf(SET_BACK_MS[1])}), as a local clock does in autumn.`,
      advice: 'If the times are local, declare their zone with --time-zone, so that the doubled hour is told apart.',
    });
  return found;
}
