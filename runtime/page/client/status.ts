/** The one sentence at the head of the page. */
import { needsLook, type Outlook } from './outlook.ts';
import type { Plant } from './plant.ts';
import { counted } from './words.ts';

/** What the gateway does, and whether anybody should look at something. */
export function statusText({ health, facts, site }: Plant, outlooks: readonly Outlook[]): string {
  if (facts.bundle === null) return 'No bundle serves: nothing is forecast.';
  if (health.status === 'warming')
    return `${sentence(health.quality_reason ?? 'warming up')}: not yet to be relied on.`;
  const count = outlooks.filter(needsLook).length;
  const all = site.signals.length;
  const reason = health.quality_reason;
  if (count === 0 && reason === undefined)
    return all === 1 ? 'Forecasts are running.' : `Forecasts are running, all ${all} signals good.`;
  if (count === 0) return `Forecasts are running. ${sentence(reason!)}.`;
  const which = all === 1 ? 'Look at the signal' : `${counted(count, 'signal needs', 'signals need')} a look`;
  return `Forecasts are running. ${which}.`;
}

function sentence(text: string): string {
  return text.charAt(0).toUpperCase() + text.slice(1);
}
