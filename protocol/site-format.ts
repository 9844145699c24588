/**
 * Writes a site file that `parseSite` reads back to the same site: for a first file made from a history, with a comment
 * beside what was found rather than declared.
 */
import type { Document } from 'yaml';
import { formatDuration } from './duration.ts';
import type { Input, Signal, Site } from './site.ts';
import { type Exclusion, plainExclusion } from './site-exclude.ts';
import { plainPayload } from './site-payload.ts';
import { plainSignalWarn, plainWarn } from './site-warn.ts';
import { yamlLibrary } from './yaml-library.ts';

const withoutNulls = (map: Record<string, unknown>): Record<string, unknown> =>
  Object.fromEntries(Object.entries(map).filter(([, value]) => value !== null));

const plainSignal = (signal: Signal | Input): Record<string, unknown> => {
  const { highHigh, high, low, lowLow } = signal.limits;
  const limits = withoutNulls({ high_high: highHigh, high, low, low_low: lowLow });
  return withoutNulls({
    name: signal.name,
    topic: signal.topic,
    payload: plainPayload(signal.payload),
    unit: signal.unit,
    sent_in: signal.sentIn,
    scale: signal.scale === 1 ? null : signal.scale,
    offset: signal.offset === 0 ? null : signal.offset,
    wraps_at: signal.wrapsAt,
    resolution: signal.resolution,
    range: signal.range,
    aggregate: signal.aggregate,
    limits: Object.keys(limits).length === 0 ? null : limits,
    warn: plainSignalWarn(signal.warn),
    column: signal.column === signal.name ? null : signal.column,
    plan_topic: 'planTopic' in signal ? signal.planTopic : null,
  });
};

const plainSite = (site: Site): Record<string, unknown> =>
  withoutNulls({
    site: site.site,
    class: site.equipmentClass,
    time_zone: site.timeZone,
    tick: formatDuration(site.tickMs),
    horizon: site.horizon,
    lateness: formatDuration(site.latenessMs),
    root: site.root,
    residual_budget: site.residualBytesPerDay,
    warn: plainWarn(site.warn),
    signals: site.signals.map(plainSignal),
    inputs: site.inputs.length === 0 ? null : site.inputs.map(plainSignal),
    calendar: {
      time_of_day: site.calendar.timeOfDay,
      day_of_week: site.calendar.dayOfWeek,
      holidays: site.calendar.holidays,
    },
    exclude: site.exclude.length === 0 ? null : site.exclude.map(plainExclusion),
  });

/** "signals[0].limits.high" as steps. */
const stepsOf = (path: string): readonly string[] => path.split(/[.[\]]+/).filter((step) => step !== '');

const oneLine = (text: string): string => ` ${text.replace(/\s+/g, ' ').trim()}`;

const addComment = (document: Document, path: string, text: string): void => {
  const { isMap, isNode, isScalar, isSeq } = yamlLibrary();
  const node: unknown = document.getIn(
    stepsOf(path).map((step) => (/^\d+$/.test(step) ? Number(step) : step)),
    true,
  );
  // After a block list or map a comment would land behind its last line; before its first it stays beside its key.
  if (isScalar(node) || (isNode(node) && isSeq(node) && node.flow === true)) node.comment = oneLine(text);
  else if (isMap(node) || isSeq(node)) node.commentBefore = oneLine(text);
};

/**
 * YAML text of a site; every default written out, so that the file shows what may be changed.
 *
 * units   comments by field path as error messages write it ("signals[0].resolution"); '' is the head of the file; a
 *         path the file does not have is passed over
 */
export const formatSite = (site: Site, comments: Readonly<Record<string, string>> = {}): string => {
  const { Document, isMap, isSeq } = yamlLibrary();
  const document = new Document(plainSite(site), { version: '1.2', schema: 'core' });
  for (const list of ['signals', 'inputs'] as const) {
    for (let i = 0; i < site[list].length; i++) {
      for (const key of ['range', 'payload', 'limits', 'warn']) {
        const node: unknown = document.getIn([list, i, key], true);
        if (isMap(node) || isSeq(node)) node.flow = true;
      }
    }
  }
  for (let i = 0; i < site.exclude.length; i++) {
    for (const key of ['when', 'signals']) {
      const node: unknown = document.getIn(['exclude', i, key], true);
      if (isMap(node) || isSeq(node)) node.flow = true;
    }
  }
  const warn: unknown = document.get('warn', true);
  if (isMap(warn)) warn.flow = true;
  for (const [path, text] of Object.entries(comments)) {
    if (path === '') document.commentBefore = text.split('\n').map(oneLine).join('\n');
    else addComment(document, path, text);
  }
  return document.toString({ lineWidth: 0, flowCollectionPadding: false });
};

/** The key `exclude` of a site file by itself, an entry a line, as it may be pasted into one. */
export const formatExclude = (entries: readonly Exclusion[]): string => {
  const { Document, isMap } = yamlLibrary();
  const document = new Document({ exclude: entries.map(plainExclusion) }, { version: '1.2', schema: 'core' });
  for (let i = 0; i < entries.length; i++) {
    const node: unknown = document.getIn(['exclude', i], true);
    if (isMap(node)) node.flow = true;
  }
  return document.toString({ lineWidth: 0, flowCollectionPadding: false });
};
