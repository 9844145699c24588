/** What a signal's keys between payload and reading must be to each other: units, scale, counters, Sparkplug topics. */
import { conversionOf } from './conversion.ts';
import type { Fault } from './issue.ts';
import type { Signal } from './site.ts';
import { parseSparkplugSource } from './sparkplug/topic.ts';
import { convertUnits } from './units/unit.ts';

type Path = readonly PropertyKey[];

const fault = (path: Path, text: string): Fault => ({ path, isUnknownKey: false, text });

const unitFaults = (signal: Signal, path: Path): Fault[] => {
  const { unit, sentIn } = signal;
  if (sentIn === null) return [];
  const found = convertUnits(sentIn, unit);
  if (!('kind' in found)) return [];
  if (found.kind === 'dimension') {
    const text = `expected a unit that converts to the signal's "${unit}", got "${sentIn}", which measures something else`;
    return [fault([...path, 'sent_in'], text)];
  }
  const hint = found.hint === null ? '; give its factor by scale instead' : ` (did you mean "${found.hint}"?)`;
  const beside = found.code === sentIn ? `to "${unit}"` : `from "${sentIn}"`;
  const text = `expected a UCUM unit that can be converted ${beside}, got "${found.code}"${hint}`;
  return [fault([...path, found.code === sentIn ? 'sent_in' : 'unit'], text)];
};

const counterFaults = (signal: Signal, path: Path): Fault[] => {
  const { aggregate, wrapsAt, scale, offset } = signal;
  if (aggregate !== 'increment') {
    if (wrapsAt === null) return [];
    const text = `expected wraps_at only with the aggregate increment, for a counter, got the aggregate ${aggregate}`;
    return [fault([...path, 'wraps_at'], text)];
  }
  const faults: Fault[] = [];
  if (offset !== 0)
    faults.push(
      fault(
        [...path, 'offset'],
        `expected none with the aggregate increment, where only differences count, got ${offset}`,
      ),
    );
  if (scale < 0)
    faults.push(fault([...path, 'scale'], `expected a number above 0 with the aggregate increment, got ${scale}`));
  const how = conversionOf(signal);
  if (how !== null && (how.before !== 0 || how.after !== 0)) {
    const text = `expected a unit that begins where "${signal.unit}" does, since only differences of a counter count, got "${signal.sentIn}"`;
    faults.push(fault([...path, 'sent_in'], text));
  }
  return faults;
};

const sparkplugFaults = ({ topic, payload }: Signal, path: Path): Fault[] => {
  if (payload.kind !== 'sparkplug' || topic === null || parseSparkplugSource(topic) !== null) return [];
  const levels = topic.split('/');
  const isTyped = levels[0] === 'spBv1.0' && /^[ND](?:BIRTH|DATA|DEATH)$/.test(levels[2] ?? '');
  const hint = isTyped ? ` (did you mean "${levels.map((level, i) => (i === 2 ? '+' : level)).join('/')}"?)` : '';
  const wanted = '"spBv1.0/GROUP/+/NODE" or "spBv1.0/GROUP/+/NODE/DEVICE", the + for the type of message';
  return [fault([...path, 'topic'], `expected ${wanted}${hint}, got "${topic}"`)];
};

/** Lists what does not fit together between a signal's payload and its unit. */
export const conversionFaults = (signal: Signal, path: Path): Fault[] => [
  ...unitFaults(signal, path),
  ...counterFaults(signal, path),
  ...sparkplugFaults(signal, path),
];
