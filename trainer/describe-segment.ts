/** A segment in words: what it says of itself, without the bundle that would decode it. */
import { readSegmentHead, segmentHash } from '@stillwell/protocol';
import { hex } from './bundle-file.ts';
import { bytesText } from './text-table.ts';

/** First bytes of every segment. */
export const SEGMENT_MAGIC = 'SWS1';

/** Plain values for `--json`. */
export function segmentFacts(bytes: Uint8Array) {
  const head = readSegmentHead(bytes);
  const isForecast = head.bundle.some((byte) => byte !== 0);
  return {
    site: head.site,
    gateway: head.gateway,
    stream: hex(head.stream),
    number: head.number,
    hash: hex(segmentHash(bytes)),
    bundle: isForecast ? hex(head.bundle) : null,
    firstTick: head.firstTick,
    ticks: head.ticks,
    channels: head.channelCount,
    signals: head.signalCount,
    start: head.start,
    coarseness: Array.from(head.coarseness),
    startStateBytes: head.startState?.length ?? null,
    bytes: bytes.length,
    format: head.format,
    arithmetic: head.arithmetic,
  };
}

/** The facts as text for a terminal. */
export function segmentText(facts: ReturnType<typeof segmentFacts>): string {
  const perValue = (facts.bytes * 8) / Math.max(1, facts.ticks * facts.channels);
  const whose = facts.bundle === null ? 'layout and last values' : "the filter's state";
  const start =
    facts.start === 'keyed'
      ? `keyed: carries ${whose} (${bytesText(facts.startStateBytes ?? 0)} unpacked), decodes by itself`
      : `chained: starts where segment ${facts.number - 1} of the stream ended`;
  const coarse = facts.coarseness.flatMap((power, c) =>
    power > 0 ? [`channel ${c} in ${2 ** power} steps at a time`] : [],
  );
  const resolution = coarse.length === 0 ? 'as the sensors said' : `${coarse.join(', ')}; the rest as the sensors said`;
  return [
    `Segment ${facts.number} of site ${facts.site}, gateway ${facts.gateway}, stream ${facts.stream}`,
    `  hash        ${facts.hash}`,
    `  bundle      ${facts.bundle ?? 'none: coded against the last values'}`,
    `  ticks       ${facts.ticks} from tick ${facts.firstTick} (tick length stands in ${facts.bundle === null ? 'its start state' : 'the bundle'})`,
    `  channels    ${facts.channels}, ${facts.signals} of them signals`,
    `  resolution  ${resolution}`,
    `  start       ${start}`,
    `  size        ${bytesText(facts.bytes)}, ${perValue.toFixed(2)} bits a tick and channel`,
    `  format ${facts.format}, arithmetic ${facts.arithmetic}; checksum holds`,
  ].join('\n');
}
