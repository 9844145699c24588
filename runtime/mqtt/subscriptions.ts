/** What a gateway subscribes to, and where each message goes. */
import type { SiteTopics } from '@stillwell/protocol';

/** Takers of messages. None may throw. */
export interface Takers {
  readonly bundle: (payload: Uint8Array) => void;
  readonly receipt: (payload: Uint8Array) => void;
  readonly question: (payload: Uint8Array) => void;
  readonly reading: (topic: string, payload: Uint8Array) => void;
}

/** Filters in the order they should be granted: what steers the gateway before the readings. */
export function filtersOf(topics: SiteTopics, readingFilters: readonly string[]): readonly string[] {
  return [...new Set([topics.bundle, topics.receipts, topics.questions, ...readingFilters])];
}

/** Gives a message to its taker; a blanked retained bundle (no bytes) is nobody's. */
export function dispatch(topics: SiteTopics, takers: Takers, topic: string, payload: Uint8Array): void {
  if (topic === topics.bundle) {
    if (payload.length > 0) takers.bundle(payload);
  } else if (topic === topics.receipts) takers.receipt(payload);
  else if (topic === topics.questions) takers.question(payload);
  else takers.reading(topic, payload);
}
