/**
 * Says in plain words whether the model beat the obvious guesses on history it never saw. The gate is deliberately
 * simple: skill over the strongest simple rival, averaged over the horizon. It is not a significance test.
 */

/** The judge's word on one signal. */
export interface Verdict {
  readonly signal: string;
  /** Rival with the smallest mean squared error over the whole horizon. */
  readonly bestRival: string;
  /** 1 - mse/mse of the strongest rival, both averaged over the whole horizon. */
  readonly skill: number;
  /** The same at single steps, in the order of `Verdicts.horizons`, against the strongest rival at that step. */
  readonly skillAt: readonly number[];
  /** Share of held-out readings inside the bounds, all steps together. */
  readonly coverage: number;
  readonly sentence: string;
}

/** The judge's word on the whole model. */
export interface Verdicts {
  /** Steps of `skillAt`: 1, H/4, H/2 and H without repeats. */
  readonly horizons: readonly number[];
  readonly signals: readonly Verdict[];
  /** Mean of the signals' skills. */
  readonly meanSkill: number;
  readonly hasSkill: boolean;
  /** One sentence for the whole model. */
  readonly sentence: string;
}
