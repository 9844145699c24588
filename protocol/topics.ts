/**
 * The topics of ours, and the standard's rules for topic names and filters (OASIS MQTT 3.1.1 and 5.0, section 4.7).
 */
import { ProtocolError } from './errors.ts';
import { MAX_TOPIC_BYTES } from './limits.ts';

/** Every topic of one site. */
export interface SiteTopics {
  readonly state: string;
  /** One retained forecast a signal. */
  readonly forecast: (signal: string) => string;
  /** The compact message with every signal. */
  readonly forecastAll: string;
  readonly health: string;
  readonly segments: string;
  readonly receipts: string;
  readonly bundle: string;
  readonly orders: string;
  readonly questions: string;
  /** The open warnings of one signal. */
  readonly warning: (signal: string) => string;
  /** Answers to one asker whose client has no response topic of its own. */
  readonly answers: (asker: string) => string;
}

const LEVELS = {
  state: 'state',
  forecastAll: 'forecasts',
  health: 'health',
  segments: 'segments',
  receipts: 'receipts',
  bundle: 'bundle',
  orders: 'orders',
  questions: 'questions',
} as const;

/** What a topic of ours carries. */
export type TopicKind = keyof typeof LEVELS | 'forecast' | 'warning' | 'answers';

/** A topic of ours taken apart; `signal` for kinds 'forecast' and 'warning', of kind 'answers' the asker. */
export interface ParsedTopic {
  readonly site: string;
  readonly kind: TopicKind;
  readonly signal: string | null;
}

/** Levels with one topic a name below them, and the kind of each. */
const NAMED: Readonly<Record<string, TopicKind>> = { forecast: 'forecast', warning: 'warning', answers: 'answers' };

/**
 * The topics of a site under a root.
 *
 * units   root one or more levels, site and signal one level each; wildcards may stand for site and signal when the
 *         result is used as a filter (`topicsOf(root, '+').segments`)
 */
export const topicsOf = (root: string, site: string): SiteTopics => {
  const base = `${root}/${site}`;
  return Object.freeze({
    state: `${base}/${LEVELS.state}`,
    forecast: (signal: string) => `${base}/forecast/${signal}`,
    forecastAll: `${base}/${LEVELS.forecastAll}`,
    health: `${base}/${LEVELS.health}`,
    segments: `${base}/${LEVELS.segments}`,
    receipts: `${base}/${LEVELS.receipts}`,
    bundle: `${base}/${LEVELS.bundle}`,
    orders: `${base}/${LEVELS.orders}`,
    questions: `${base}/${LEVELS.questions}`,
    warning: (signal: string) => `${base}/warning/${signal}`,
    answers: (asker: string) => `${base}/answers/${asker}`,
  });
};

/** Takes a topic of ours apart; null if it is not one under this root. */
export const parseTopic = (root: string, topic: string): ParsedTopic | null => {
  if (!topic.startsWith(`${root}/`)) return null;
  const [site, level, signal, ...rest] = topic.slice(root.length + 1).split('/');
  if (!site || level === undefined || rest.length > 0) return null;
  if (Object.hasOwn(NAMED, level)) return signal ? { site, kind: NAMED[level]!, signal } : null;
  const found = Object.entries(LEVELS).find(([, text]) => text === level);
  if (found === undefined || signal !== undefined) return null;
  return { site, kind: found[0] as TopicKind, signal: null };
};

const refuse = (what: string, text: string, why: string): never => {
  throw new ProtocolError('topic', `${what} ${JSON.stringify(text)}: ${why}`, { details: { topic: text } });
};

const checkText = (what: string, text: string): void => {
  if (text.length === 0) refuse(what, text, 'expected at least one character, got none'); // [MQTT-4.7.3-1]
  if (text.includes('\0')) refuse(what, text, 'the null character is not allowed'); // [MQTT-4.7.3-2]
  if (/\p{Surrogate}/u.test(text)) refuse(what, text, 'expected well-formed text, got half a surrogate pair'); // [MQTT-1.5.4-1]
  const bytes = Buffer.byteLength(text);
  if (bytes > MAX_TOPIC_BYTES)
    refuse(what, `${text.slice(0, 32)}…`, `expected at most ${MAX_TOPIC_BYTES} bytes, got ${bytes}`);
};

/**
 * Refuses what is no topic name to publish to.
 *
 * throws  ProtocolError 'topic'
 * source  OASIS MQTT 5.0 sections 3.3.2.1, 4.7.1, 4.7.3
 */
export const checkTopicName = (topic: string): void => {
  checkText('topic name', topic);
  if (/[+#]/.test(topic)) refuse('topic name', topic, 'the wildcards + and # are for filters only'); // [MQTT-3.3.2-2]
};

/**
 * Refuses what is no topic filter; a shared subscription `$share/name/filter` is checked by its parts.
 *
 * throws  ProtocolError 'topic' saying which rule is broken
 * source  OASIS MQTT 5.0 sections 4.7.1.2, 4.7.1.3, 4.7.3, 4.8.2
 */
export const checkTopicFilter = (filter: string): void => {
  checkText('topic filter', filter);
  const levels = splitShared(filter).split('/');
  levels.forEach((level, i) => {
    // [MQTT-4.7.1-1], [MQTT-4.7.1-2]
    if (level.includes('#') && level !== '#') refuse('topic filter', filter, '# must be a whole level');
    if (level === '#' && i !== levels.length - 1) refuse('topic filter', filter, '# must be the last level');
    if (level.includes('+') && level !== '+') refuse('topic filter', filter, '+ must be a whole level');
  });
};

/** The filter inside `$share/name/filter`; any other filter unchanged. */
const splitShared = (filter: string): string => {
  if (filter !== '$share' && !filter.startsWith('$share/')) return filter;
  const [, name, ...rest] = filter.split('/');
  const inner = rest.join('/');
  // [MQTT-4.8.2-1], [MQTT-4.8.2-2]
  if (!name || /[+#]/.test(name) || inner.length === 0) {
    refuse('topic filter', filter, 'expected $share/name/filter with a name free of wildcards');
  }
  return inner;
};

/**
 * Whether every topic name under one filter falls under another one too.
 *
 * units   both already checked, neither shared
 * source  OASIS MQTT 5.0 sections 4.7.1, 4.7.2 [MQTT-4.7.2-1]
 */
export const coversFilter = (wide: string, narrow: string): boolean => {
  // Every topic has a first level.
  if (narrow === '#') return wide === '#' || wide === '+/#';
  const levels = narrow.split('/');
  const wanted = wide.split('/');
  if (narrow.startsWith('$') && (wanted[0] === '+' || wanted[0] === '#')) return false;
  for (let i = 0; i < wanted.length; i++) {
    if (wanted[i] === '#') return true;
    if (i >= levels.length || levels[i] === '#') return false;
    if (wanted[i] !== '+' && wanted[i] !== levels[i]) return false;
  }
  return wanted.length === levels.length;
};

/**
 * Whether a topic name falls under a topic filter.
 *
 * units   both already checked; a shared subscription matches as the filter inside it
 * source  OASIS MQTT 5.0 sections 4.7.1, 4.7.2 [MQTT-4.7.2-1], 4.7.3
 */
export const matchesFilter = (filter: string, topic: string): boolean => {
  const wanted = splitShared(filter).split('/');
  const levels = topic.split('/');
  if (topic.startsWith('$') && (wanted[0] === '+' || wanted[0] === '#')) return false;
  for (let i = 0; i < wanted.length; i++) {
    // '#' stands for its parent level too, so it matches when the topic has just ended.
    if (wanted[i] === '#') return true;
    if (i >= levels.length) return false;
    if (wanted[i] !== '+' && wanted[i] !== levels[i]) return false;
  }
  return wanted.length === levels.length;
};
