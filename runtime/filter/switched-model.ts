/** The switched kind's model: what switched.ts computes with. */
import type { BankModel } from './model.ts';
import type { SwitchedSection } from './switched-section.ts';

/**
 * The linear kind's bank and read-out, and the section that takes over the signals it forecasts better.
 *
 * shapes  as BankModel and SwitchedSection
 * units   standardised
 */
export interface SwitchedModel extends BankModel {
  readonly kind: 'switched';
  readonly switched: SwitchedSection;
}
