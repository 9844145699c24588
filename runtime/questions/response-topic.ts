/**
 * Where an answer may go. A response topic is the asker's wish, and anybody who may ask could make the gateway publish
 * anywhere, the plant's commands among it. So only topics below our own `answers/` are taken, at whatever depth.
 */
import { checkTopicName, type SiteTopics } from '@stillwell/protocol';

/** Largest mark of an asker that is carried back. */
export const MAX_CORRELATION_BYTES = 256;
/** Levels of names far beyond any asker's. */
const MAX_RESPONSE_TOPIC_BYTES = 512;

/** What is wrong with a response topic, as a sentence; null: an answer may go there. */
export function responseTopicFault(topics: SiteTopics, topic: string): string | null {
  const below = topics.answers('');
  const isOurs = topic.startsWith(below) && topic.length > below.length;
  if (isOurs && Buffer.byteLength(topic) <= MAX_RESPONSE_TOPIC_BYTES) {
    try {
      checkTopicName(topic);
      return null;
    } catch (error) {
      return `response topic: ${(error as Error).message}`;
    }
  }
  const got = topic.length > 80 ? `${topic.slice(0, 80)}…` : topic;
  return `response topic: expected one of at most ${MAX_RESPONSE_TOPIC_BYTES} bytes below ${below}, got "${got}"`;
}
