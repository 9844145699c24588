/**
 * The order of channels, the same everywhere: the site's signals, then its inputs.
 */
import type { Signal, Site } from '@stillwell/protocol';

/** Channels of a site in order. */
export function channelsOf(site: Site): readonly Signal[] {
  return [...site.signals, ...site.inputs];
}
