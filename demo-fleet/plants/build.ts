/** From a site's design to a plant in motion. */
import { openRandom } from '../random.ts';
import { ColdStore } from './cold-store.ts';
import { DefrostTimes } from './defrost.ts';
import type { Plant } from './plant.ts';
import type { DemoSite } from './sites.ts';
import { WetWell } from './wet-well.ts';

/** The plant of a demo site, at rest at `startMs`; the same seed gives the same plant, minute by minute. */
export function buildPlant(site: DemoSite, seed: number, startMs: number): Plant {
  const random = openRandom(seed, `plant ${site.name}`);
  if (site.kind === 'wet-well') return new WetWell(site.design, random, startMs);
  return new ColdStore(site.design, random, defrostTimesOf(site, seed));
}

/** When a site's defrosts are commanded; null where it has none. The plan and the plant must be given the same seed. */
export function defrostTimesOf(site: DemoSite, seed: number): DefrostTimes | null {
  if (site.kind !== 'cold-store' || site.design.defrost === null) return null;
  const { defrost, tickMs, utcOffsetHours } = site.design;
  return new DefrostTimes(defrost, site.name, seed, tickMs, utcOffsetHours);
}
