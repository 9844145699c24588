/**
 * What rounding cost: the same hindcast with the float model and with the model as it stands in the bundle.
 */

/** Standardised mean squared errors over signals and steps of the judged part. */
export interface Audit {
  readonly floatMse: number;
  readonly quantisedMse: number;
  /** quantisedMse / floatMse. */
  readonly ratio: number;
}
