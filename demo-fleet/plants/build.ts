/** From a site's design to a plant in motion. */
import { openRandom } from '../random.ts';
import { ColdStore } from './cold-store.ts';
import type { Plant } from './plant.ts';
import type { DemoSite } from './sites.ts';
import { WetWell } from './wet-well.ts';

/** The plant of a demo site, at rest at `startMs`; the same seed gives the same plant, minute by minute. */
export function buildPlant(site: DemoSite, seed: number, startMs: number): Plant {
  const random = openRandom(seed, `plant ${site.name}`);
  return site.kind === 'wet-well' ? new WetWell(site.design, random, startMs) : new ColdStore(site.design, random);
}
