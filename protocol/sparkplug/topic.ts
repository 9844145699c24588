/**
 * Topics of Sparkplug B: spBv1.0/GROUP/TYPE/NODE and spBv1.0/GROUP/TYPE/NODE/DEVICE (Sparkplug 3.0 section 4.1). A broker
 * that knows Sparkplug keeps the births, retained, under $sparkplug/certificates/ (chapter 10, "Sparkplug Aware MQTT
 * Server").
 */

const NAMESPACE = 'spBv1.0';
const CERTIFICATES = '$sparkplug/certificates/';

/** Types of message that say something of a node's values; commands and the hosts' own state do not. */
export const SPARKPLUG_TYPES = ['NBIRTH', 'NDEATH', 'DBIRTH', 'DDEATH', 'NDATA', 'DDATA'] as const;
/** One of them. */
export type SparkplugType = (typeof SPARKPLUG_TYPES)[number];

/** A topic taken apart. */
export interface SparkplugTopic {
  readonly group: string;
  readonly type: SparkplugType;
  readonly node: string;
  /** Null for the node itself. */
  readonly device: string | null;
  /** A birth that the broker kept. */
  readonly isKept: boolean;
}

/** The node or device that a site file's topic names. */
export interface SparkplugSource {
  readonly group: string;
  readonly node: string;
  readonly device: string | null;
}

/** Takes a topic apart; null if it is none of a node's. */
export const parseSparkplugTopic = (topic: string): SparkplugTopic | null => {
  const isKept = topic.startsWith(CERTIFICATES);
  const levels = (isKept ? topic.slice(CERTIFICATES.length) : topic).split('/');
  const [namespace, group, type, node, device] = levels;
  if (namespace !== NAMESPACE || levels.length < 4 || levels.length > 5 || !group || !node || device === '')
    return null;
  const known = SPARKPLUG_TYPES.find((one) => one === type);
  // Types of a node have no device level, those of a device have one.
  if (known === undefined || known.startsWith('D') !== (device !== undefined)) return null;
  if (isKept && !known.endsWith('BIRTH')) return null;
  return { group, type: known, node, device: device ?? null, isKept };
};

/** The node or device of a site file's topic `spBv1.0/GROUP/+/NODE[/DEVICE]`; null if it has another form. */
export const parseSparkplugSource = (filter: string): SparkplugSource | null => {
  const levels = filter.split('/');
  const [namespace, group, type, node, device] = levels;
  if (namespace !== NAMESPACE || type !== '+' || levels.length < 4 || levels.length > 5) return null;
  if ([group, node, device ?? 'none'].some((level) => !level || /[+#]/.test(level))) return null;
  return { group: group!, node: node!, device: device ?? null };
};

/** What to subscribe to hear all of a node and its devices, whose messages are numbered together. */
export const sparkplugFilters = ({ group, node }: SparkplugSource): readonly string[] => [
  `${NAMESPACE}/${group}/+/${node}/#`,
  `${CERTIFICATES}${NAMESPACE}/${group}/+/${node}/#`,
];
