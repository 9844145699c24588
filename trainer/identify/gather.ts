/**
 * The moments that learning needs, gathered in one pass: of every group at the steps that judge a choice, and in full of the
 * learning and calibration parts alone. A history with many gaps has many blocks, and a wide plant large moments, so no
 * block's moments outlive their adding up.
 */
import type { Partition } from './blocks.ts';
import { addInto, pickMoments } from './moment-sets.ts';
import { type Block, eachMoments, type MomentInput, type Moments } from './moments.ts';
import type { Layout } from './ridge.ts';

/** What was gathered. */
export interface Gathered {
  /** Of each group that has origins, in time order, at the trial steps. */
  readonly groups: readonly Moments[];
  /** Of the learning part, with what lies between its groups. */
  readonly learning: Moments;
  /** Of the calibration part; where it has no origins, of the last group of the learning part. */
  readonly calibration: Moments;
}

/**
 * Gathers the moments of a cut.
 *
 * shapes  layout of the bank; steps the trial steps
 * units   standardised; sums
 * throws  RangeError if no group has origins
 * source  moments are additive
 * cost    as `gatherMoments`
 */
export function gatherCut(input: MomentInput, layout: Layout, cut: Partition, steps: readonly number[]): Gathered {
  const tagged = [
    ...cut.groups.flatMap((blocks, group) => blocks.map((block) => ({ block, group }))),
    ...cut.between.map((block) => ({ block, group: -1 })),
  ].sort((a, b) => a.block.fromIndex - b.block.fromIndex);
  const all = Array.from({ length: layout.featureCount }, (_, f) => f);
  const groups: (Moments | null)[] = cut.groups.map(() => null);
  const lastEarly = lastWithOrigins(cut);
  const hasLate = cut.groups.slice(cut.learnGroups).some((blocks) => blocks.length > 0);
  let learning: Moments | null = null;
  let calibration: Moments | null = null;
  let at = 0;
  const blocks = tagged.map(({ block }) => block);
  for (const moments of eachMoments(input, blocks)) {
    const { group } = tagged[at++];
    if (group >= 0) groups[group] = addInto(groups[group], pickMoments(moments, layout, all, steps));
    const isLate = group >= cut.learnGroups;
    if (!isLate) learning = addInto(learning, moments);
    if (isLate || (!hasLate && group === lastEarly)) calibration = addInto(calibration, moments);
  }
  if (learning === null || calibration === null) throw new RangeError('The learning part holds no usable origin.');
  return { groups: groups.filter((one) => one !== null), learning, calibration };
}

/**
 * Moments of some blocks together.
 *
 * shapes  as Moments
 * units   standardised; sums
 * throws  RangeError if there are no blocks
 * source  moments are additive
 * cost    as `gatherMoments`
 */
export function gatherSum(input: MomentInput, blocks: readonly Block[]): Moments {
  let sum: Moments | null = null;
  for (const moments of eachMoments(input, blocks)) sum = addInto(sum, moments);
  if (sum === null) throw new RangeError('The history holds no usable origin.');
  return sum;
}

function lastWithOrigins({ groups, learnGroups }: Partition): number {
  return groups.slice(0, learnGroups).findLastIndex((blocks) => blocks.length > 0);
}
