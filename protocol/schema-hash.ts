/**
 * Whether a bundle was learned for the site it is loaded at: the same signals and inputs in the same order, with the same
 * units, aggregates and tick. The hash decides; the description tells a person why.
 */
import type { Bundle } from './bundle.ts';
import { encode } from './codec.ts';
import { sha256 } from './digest.ts';
import { formatDuration } from './duration.ts';
import type { Aggregate, Site } from './site.ts';

interface Channel {
  readonly role: 'signal' | 'input';
  readonly name: string;
  readonly unit: string;
  readonly aggregate: Aggregate;
}

const channelsOf = (site: Site): readonly Channel[] => [
  ...site.signals.map((signal) => ({ role: 'signal' as const, ...signal })),
  ...site.inputs.map((input) => ({ role: 'input' as const, ...input })),
];

const hashOf = (tickMs: number, channels: readonly Channel[]): Uint8Array => {
  const rows = channels.map(({ role, name, unit, aggregate }) => [role, name, unit, aggregate]);
  return sha256('stillwell schema v1\n', encode({ tickMs, channels: rows }));
};

/** SHA-256 over tick and, in order, role, name, unit and aggregate of every signal and input; 32 bytes. */
export const schemaHash = (site: Site): Uint8Array => hashOf(site.tickMs, channelsOf(site));

/** The hash that a bundle's own channels give; a bundle whose `schema` differs from it contradicts itself. */
export const bundleSchemaHash = (bundle: {
  readonly tickMs: number;
  readonly channels: readonly Channel[];
}): Uint8Array => hashOf(bundle.tickMs, bundle.channels);

/** Names the first thing in which a bundle and a site disagree, bundle first; null when the hashes agree. */
export const describeSchemaDifference = (bundle: Bundle, site: Site): string | null => {
  if (Buffer.compare(bundle.schema, schemaHash(site)) === 0) return null;
  if (bundle.tickMs !== site.tickMs) {
    return `tick: the bundle has ${formatDuration(bundle.tickMs)}, the site ${formatDuration(site.tickMs)}`;
  }
  const mine = channelsOf(site);
  for (let i = 0; i < Math.max(mine.length, bundle.channels.length); i++) {
    const theirs = bundle.channels[i];
    const ours = mine[i];
    if (theirs === undefined) return `channel ${i}: the bundle has none, the site ${ours!.role} "${ours!.name}"`;
    if (ours === undefined) return `channel ${i}: the bundle has ${theirs.role} "${theirs.name}", the site none`;
    for (const field of ['name', 'role', 'unit', 'aggregate'] as const) {
      if (theirs[field] !== ours[field]) {
        return `channel ${i} ("${theirs.name}"), ${field}: the bundle has ${theirs[field]}, the site ${ours[field]}`;
      }
    }
  }
  return 'schema hash: the bundle carries another hash than its own signals give';
};
