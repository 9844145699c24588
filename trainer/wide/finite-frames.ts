/** Frames hold numbers: a dead pixel or a gap written as none is refused where it stands, before it spreads into every feature. */
import { refusal } from '../history/refusal.ts';

/** TrainError 'history' at the first number that is not finite; `firstFrame` counts from 0. */
export function checkFinite(
  name: string,
  values: Float32Array,
  numbers: number,
  frameLength: number,
  firstFrame: number,
): void {
  // One sum tells: whatever is added to a number that is not finite stays so.
  let sum = 0;
  for (let k = 0; k < numbers; k++) sum += 0 * values[k];
  if (sum === 0) return;
  const k = values.findIndex((value) => !Number.isFinite(value));
  const frame = firstFrame + Math.floor(k / frameLength);
  throw refusal(
    { file: name },
    'numbers alone',
    `${values[k]} at number ${k % frameLength} of frame ${frame} (from 0)`,
    'fill what is missing, or leave the frame out',
  );
}
