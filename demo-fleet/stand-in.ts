/**
 * What a bundle would have forecast otherwise, on paper: run by the gateway's own filter beside the gateway, without any
 * plan, and scored on the very origins for which forecasts came over MQTT. So an old bundle is set beside a new one, and a
 * gateway that knows no plan beside one that does.
 */
import { Scorer } from './scores.ts';
import { Shadow } from './shadow.ts';
import type { SiteRun } from './site-run.ts';
import type { SealedBundle } from './workshop.ts';

/** Label under which an origin is scored, by the digest of the bundle that forecast it; null: not scored. */
export type StandInLabel = (origin: number, digest: string) => string | null;

/** Follows a site from now on with one bundle; catches up on what was said so far. */
export class StandIn {
  readonly scorer: Scorer;
  private readonly paths = new Map<number, Float64Array>();

  constructor(site: SiteRun, { bundle }: SealedBundle, labelOf: StandInLabel) {
    const shadow = new Shadow(bundle);
    this.scorer = new Scorer({
      signals: site.signalNames.length,
      horizon: bundle.horizon,
      period: site.perDay,
      // As the site's own scorer, so that both count the same pairs.
      firstTick: site.playTick - site.perDay,
    });
    for (const row of site.lastDay) this.scorer.addReadings(row);
    site.said.forEach((said, k) => {
      shadow.follow(site.playTick + k, said);
      this.scorer.addReadings(said);
    });
    site.tickListeners.push((tick, said) => {
      this.paths.set(tick, shadow.follow(tick, said));
      this.scorer.addReadings(said);
    });
    site.forecastListeners.push((origin, digest) => {
      const path = this.paths.get(origin);
      const label = labelOf(origin, digest);
      if (path === undefined || label === null) return;
      this.paths.delete(origin);
      this.scorer.addForecast(origin, label, path);
    });
  }
}
