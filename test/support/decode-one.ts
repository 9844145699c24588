/** One signal's reading out of one message, for tests. */
import { type DecodedSignal, MessageDecoder } from '../../protocol/message-decoder.ts';
import { type PayloadReason, refusalText } from '../../protocol/payload/refusal.ts';

/** What became of a message. */
export interface DecodedOne {
  readonly value?: number;
  /** Null where the payload carries no time. */
  readonly timeMs?: number | null;
  readonly reason?: PayloadReason;
  readonly text?: string;
}

/** Reads a message on the signal's own topic. */
export function decodeOne(signal: DecodedSignal, payload: Uint8Array): DecodedOne {
  let found: DecodedOne | null = null;
  const isHeard = new MessageDecoder([signal]).decode(signal.topic!, payload, {
    take: (_, value, timeMs) => {
      found = { value, timeMs: Number.isNaN(timeMs) ? null : timeMs };
    },
    refuse: (_, reason, at, got) => {
      found = { reason, text: refusalText(reason, at, got) };
    },
  });
  if (!isHeard || found === null) throw new Error('the message said nothing');
  return found;
}
