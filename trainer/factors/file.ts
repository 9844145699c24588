/**
 * Factors as a file, `.swf`: an envelope (envelope.ts) of magic "swfactor" and version 1.
 *
 * The head names the site and all sizes. The body has, in this order: offsets (nc); the sums as `SUM_ARRAYS` lists them; of each
 * end: weight, isThere (nc), level (nc), changes (nc × places); of
 * runs that rang out, where there are some: levels, changes (nc × nc × places each); of the open run, where there is one: isThere (nc), level (nc),
 * changes (nc × kept), thinned (nc × thinned); of what waits: last (nc), gap (nc), values (nc × waiting), isExcluded (waiting), watches (ny × 21).
 */
import { type Site, schemaHash, toHex } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import { channelsOf } from '../history/channels.ts';
import { readBytesFile } from '../key-file.ts';
import { type EnvelopeKind, openEnvelope, sealEnvelope } from './envelope.ts';
import type { Factors, OpenRun, RunEnd, RunSums, Waiting } from './factors.ts';
import { gridOf } from './moments.ts';
import { SUM_ARRAYS, sumLengths } from './run-sums.ts';
import { WILD_STATE } from './wild.ts';

/** Version written, and the only one read. */
export const FACTORS_VERSION = 1;
const FILE: EnvelopeKind = { magic: 'swfactor', version: FACTORS_VERSION, noun: 'factors file' };
const ANEW = 'run fit on the whole history to write it anew';

/** What the head says beside the shape. */
type Head = Omit<Factors, 'offsets' | 'sums' | 'ends' | 'rungOut' | 'open' | 'waiting'> & {
  readonly count: number;
  readonly ends: number;
  readonly hasRungOut: boolean;
  readonly open: { readonly ticks: number; readonly kept: number; readonly thinned: number } | null;
  readonly waiting: number;
};

/**
 * Writes factors down; the same factors give the same bytes.
 *
 * shapes  none
 * units   bytes
 * throws  nothing
 * source  file head
 * cost    the size of the file
 */
export function encodeFactors(factors: Factors): Uint8Array {
  const { offsets, sums, ends, rungOut, open, waiting, ...shape } = factors;
  const head: Head = {
    ...shape,
    count: sums.count,
    ends: ends.length,
    hasRungOut: rungOut !== null,
    open: open && { ticks: open.ticks, kept: open.changes[0].length, thinned: open.thinned[0].length },
    waiting: waiting.isExcluded.length,
  };
  const body: (Float64Array | Uint8Array)[] = [offsets, ...SUM_ARRAYS.map((key) => sums[key])];
  for (const { weight, isThere, level, changes } of ends) body.push(Float64Array.of(weight), isThere, level, changes);
  if (rungOut !== null) body.push(rungOut.levels, rungOut.changes);
  if (open !== null) body.push(open.isThere, open.level, ...open.changes, ...open.thinned);
  body.push(waiting.last, waiting.gap, ...waiting.values, waiting.isExcluded, ...waiting.watches);
  return sealEnvelope(FILE, JSON.stringify(head), body);
}

/**
 * Reads factors from bytes.
 *
 * shapes  none
 * units   bytes
 * throws  TrainError 'factors' if they are no factors, of another version, cut short or damaged
 * source  file head
 * cost    the size of the file
 */
export function decodeFactors(bytes: Uint8Array, path: string): Factors {
  const refuse = (what: string): never => {
    throw new TrainError('factors', `${path}: ${what}; give the file as fit or refit wrote it, or ${ANEW}`, {
      details: { path },
    });
  };
  const { head, body } = openEnvelope(FILE, bytes, refuse);
  try {
    return fromParts(JSON.parse(head) as Head, body);
  } catch (cause) {
    throw new TrainError('factors', `${path}: its sizes contradict each other; ${ANEW}`, { cause, details: { path } });
  }
}

function fromParts(head: Head, body: Float64Array): Factors {
  const { count, ends: endCount, hasRungOut, open: openHead, waiting: waitingTicks, ...shape } = head;
  const channels = shape.names.length;
  const places = gridOf(shape).lags.length;
  let at = 0;
  const next = (length: number): Float64Array => {
    at += length;
    if (!(length >= 0) || at > body.length) throw new RangeError(`The body ends after ${body.length} numbers.`);
    return body.slice(at - length, at);
  };
  const rows = (length: number): Float64Array[] => shape.names.map(() => next(length));
  const offsets = next(channels);
  const lengths = sumLengths(channels, places, shape.longestHorizon);
  const arrays = Object.fromEntries(SUM_ARRAYS.map((key) => [key, next(lengths[key])]));
  const sums = Object.freeze({ ...arrays, count } as unknown as RunSums);
  const ends: RunEnd[] = Array.from({ length: endCount }, () => ({
    weight: next(1)[0],
    isThere: Uint8Array.from(next(channels)),
    level: next(channels),
    changes: next(channels * places),
  }));
  const rungLength = channels * channels * places;
  const rungOut = hasRungOut ? { levels: next(rungLength), changes: next(rungLength) } : null;
  const open: OpenRun | null = openHead && {
    ticks: openHead.ticks,
    isThere: Uint8Array.from(next(channels)),
    level: next(channels),
    changes: rows(openHead.kept),
    thinned: rows(openHead.thinned),
  };
  const waiting: Waiting = {
    last: next(channels),
    gap: next(channels),
    values: rows(waitingTicks),
    isExcluded: Uint8Array.from(next(waitingTicks)),
    watches: Array.from({ length: shape.signalCount }, () => next(WILD_STATE)),
  };
  if (at !== body.length) throw new RangeError(`The body has ${body.length} numbers, ${at} of them known.`);
  return Object.freeze({ ...shape, offsets, sums, ends, rungOut, open, waiting });
}

/**
 * Reads a factors file.
 *
 * shapes  none
 * units   none
 * throws  TrainError 'file' where there is none to read; as `decodeFactors`
 * source  none
 * cost    the size of the file
 */
export function readFactors(path: string): Factors {
  return decodeFactors(readBytesFile(path, 'the factors (.swf) that fit or refit wrote'), path);
}

/**
 * Refuses factors that are not of this site as it is now.
 *
 * shapes  none
 * units   none
 * throws  TrainError 'factors' naming what differs: site, tick, signals, their order, units and aggregates; or a horizon beyond them
 * source  none
 * cost    trivial
 */
export function checkBelongs(factors: Factors, site: Site, path: string): void {
  const refuse = (what: string, got: string, expected: string): never => {
    throw new TrainError(
      'factors',
      `${path}: of ${what} ${got}, expected ${expected}; give the factors of this site, or ${ANEW}`,
      {
        details: { path, got, expected },
      },
    );
  };
  if (factors.site !== site.site) refuse('site', factors.site, site.site);
  if (factors.tickMs !== site.tickMs) refuse('a tick of', `${factors.tickMs} ms`, `${site.tickMs} ms`);
  const channels = channelsOf(site);
  if (factors.names.length !== channels.length) {
    refuse('channels', factors.names.join(', '), channels.map(({ name }) => name).join(', '));
  }
  channels.forEach(({ name, unit }, c) => {
    const [theirs, theirUnit] = [factors.names[c], factors.units[c]];
    if (theirs !== name) {
      const why = factors.names.includes(name) ? ' (the order differs: put it back as it was)' : '';
      refuse(`a channel ${c + 1} called`, theirs, `${name}${why}`);
    }
    if (theirUnit !== unit) refuse(`${name} in`, theirUnit, unit);
  });
  const schema = toHex(schemaHash(site));
  if (factors.schema !== schema)
    refuse('schema', factors.schema.slice(0, 12), `${schema.slice(0, 12)} (roles or aggregates differ)`);
  if (site.horizon > factors.longestHorizon) {
    refuse('horizons up to', `${factors.longestHorizon} ticks`, `at least ${site.horizon}`);
  }
}
