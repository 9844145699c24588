/** Where readings go that were taken out of messages. */
import type { PayloadReason } from './payload/refusal.ts';

/** Takes readings and refusals, channel by channel. Neither may throw. */
export interface ReadingTarget {
  /**
   * value   finite, in the channel's unit
   * timeMs  ms since 1970 UTC; NaN where the payload carries no time, so that arrival counts
   */
  take(channel: number, value: number, timeMs: number): void;
  /** at, got  as `refusalText` wants them */
  refuse(channel: number, reason: PayloadReason, at: string, got: unknown): void;
}
