/** Factors as what learning knows of the time before a history. */
import { createHash } from 'node:crypto';
import type { Earlier } from '../identify/earlier.ts';
import type { Factors } from './factors.ts';
import { encodeFactors } from './file.ts';
import { momentsFromFactors, reachesMemories } from './moments.ts';

/**
 * The time that factors hold.
 *
 * shapes  encoded: the same as a file has them, where they are at hand
 * units   as Earlier
 * throws  nothing; its moments as `momentsFromFactors`
 * source  none
 * cost    one encoding, for the digest
 */
export function earlierOf(factors: Factors, encoded = encodeFactors(factors)): Earlier {
  return {
    fromTick: factors.fromTick,
    toTick: factors.toTick,
    ticks: factors.ticks,
    digest: new Uint8Array(createHash('sha256').update(encoded).digest()),
    // A round goes on after a run; where runs rang out nothing is known of that.
    longestRound: factors.rungOut === null ? factors.longestRound : 0,
    moments(wish) {
      if (!reachesMemories(factors, wish.bank)) return null;
      const moments = momentsFromFactors(factors, wish);
      return moments.origins > 0 ? moments : null;
    },
  };
}
