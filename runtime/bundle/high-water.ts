/**
 * The highest sequence accepted in each key epoch. It only ever rises, and is durable before the bundle that raised it is
 * activated, so that no older bundle comes back by a replay, a fall-back or a power cut.
 */

/** Ascending by epoch. */
export type HighWater = readonly { readonly epoch: number; readonly sequence: number }[];

/** Where a bundle stands: only 'above' may be installed; epochs before the newest are over. */
export function standing(highWater: HighWater, epoch: number, sequence: number): 'above' | 'at' | 'below' {
  const newest = highWater[highWater.length - 1];
  if (newest === undefined || epoch > newest.epoch) return 'above';
  if (epoch < newest.epoch) return 'below';
  return sequence > newest.sequence ? 'above' : sequence === newest.sequence ? 'at' : 'below';
}

/** The marks after accepting a bundle. */
export function raised(highWater: HighWater, epoch: number, sequence: number): HighWater {
  if (standing(highWater, epoch, sequence) !== 'above') return highWater;
  return [...highWater.filter((mark) => mark.epoch < epoch), { epoch, sequence }];
}
