/**
 * Steps ahead in groups that double in length: what one step is forecast by best is much the same for its neighbours, and
 * not for steps ten times as far. Penalties and features are chosen a group at a time, judged at one or two of its steps.
 */

/** Steps from..to. */
export interface StepGroup {
  readonly from: number;
  readonly to: number;
}

/** Last steps of the first groups; from there on each group ends at twice the step before it. */
const FIRST_ENDS = [1, 3, 6, 12] as const;
/** A group longer than this is judged in its middle too. */
const SHORT_GROUP = 3;

/**
 * The groups of a horizon: 1, 2-3, 4-6, 7-12, then doubling.
 *
 * shapes  result ascending and without gaps, from 1 to the horizon
 * units   steps
 * throws  nothing
 * source  own choice
 * cost    trivial
 */
export function stepGroups(horizon: number): StepGroup[] {
  const groups: StepGroup[] = [];
  let from = 1;
  for (let k = 0; from <= horizon; k++) {
    const end = k < FIRST_ENDS.length ? FIRST_ENDS[k] : 2 * (from - 1);
    groups.push({ from, to: Math.min(end, horizon) });
    from = end + 1;
  }
  return groups;
}

/**
 * Steps at which the groups are judged, and the group of each.
 *
 * shapes  steps ascending; groups as long
 * units   steps; indices into the groups
 * throws  nothing
 * source  own choice
 * cost    trivial
 */
export function trialSteps(horizon: number): { readonly steps: number[]; readonly groups: number[] } {
  const steps: number[] = [];
  const groups: number[] = [];
  stepGroups(horizon).forEach(({ from, to }, g) => {
    const length = to - from + 1;
    for (const step of length > SHORT_GROUP ? [from - 1 + Math.ceil(length / 2), to] : [to]) {
      steps.push(step);
      groups.push(g);
    }
  });
  return { steps, groups };
}
