/** Parts of a bank: its first means, resonators and lags, so that one gathering of moments serves every size tried. */
import { type Bank, featureCount } from './bank.ts';

/** How many of each kind a sub-bank keeps, from the first on. */
export interface BankSize {
  readonly means: number;
  readonly resonators: number;
  readonly lags: number;
  /** 1: with the level. */
  readonly level: number;
}

/**
 * Sizes of banks without lags and level worth trying, from small to wide.
 *
 * shapes  none
 * units   counts
 * throws  nothing
 * source  own choice
 * cost    trivial
 */
export function bankSizes(bank: Bank): BankSize[] {
  const means = bank.decays.length;
  const resonators = bank.resonators.length;
  const plain = { lags: 0, level: 0 };
  const sizes: BankSize[] = [
    { means: Math.min(4, means), resonators: 0, ...plain },
    { means, resonators: 0, ...plain },
    ...(bank.rungs ?? [Math.ceil(resonators / 3)]).map((count) => ({
      means,
      resonators: Math.min(count, resonators),
      ...plain,
    })),
    { means, resonators, ...plain },
  ];
  return sizes.filter(
    (size, at) => sizes.findIndex((other) => other.means === size.means && other.resonators === size.resonators) === at,
  );
}

/**
 * The sub-bank of a size, and which features of the whole bank it keeps within a channel.
 *
 * shapes  kept ascending
 * units   none
 * throws  nothing
 * source  order of features: means, resonators, level, lags
 * cost    trivial
 */
export function subBank(bank: Bank, size: BankSize): { readonly bank: Bank; readonly kept: readonly number[] } {
  const smaller = {
    decays: bank.decays.slice(0, size.means),
    resonators: bank.resonators.slice(0, size.resonators),
    lags: bank.lags.slice(0, size.lags),
    ...(size.level > 0 ? { hasLevel: true } : {}),
  };
  const levelAt = bank.decays.length + 2 * bank.resonators.length;
  const firstLag = levelAt + (bank.hasLevel === true ? 1 : 0);
  const kept = [
    ...smaller.decays.keys(),
    ...Array.from({ length: 2 * size.resonators }, (_, f) => bank.decays.length + f),
    ...(size.level > 0 ? [levelAt] : []),
    ...Array.from(smaller.lags.keys(), (f) => firstLag + f),
  ];
  if (featureCount(smaller) !== kept.length) throw new RangeError('A sub-bank lost count of its features.');
  return { bank: smaller, kept };
}
