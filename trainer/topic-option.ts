/** Options that become levels of topics: a wildcard or an empty level among them would ask for other people's messages. */
import { isName, NAME_RULE } from '@stillwell/protocol';
import { InvalidArgumentError } from 'commander';

/** A parser for the first levels of our topics. */
export function rootOption(text: string): string {
  if (text.split('/').every(isName)) return text;
  throw new InvalidArgumentError('Expected topic levels without wildcards, such as "stillwell" or "plant/forecasts".');
}

/** A parser for a site's name. */
export function siteNameOption(text: string): string {
  if (isName(text)) return text;
  throw new InvalidArgumentError(`Expected ${NAME_RULE}.`);
}
