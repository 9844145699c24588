/**
 * The old bundle left in service, on paper: run by the gateway's own filter beside the new one, and scored on the very
 * origins for which the new one's forecasts came over MQTT.
 */
import { Scorer } from './scores.ts';
import { Shadow } from './shadow.ts';
import type { SiteRun } from './site-run.ts';

/** Label of its score. */
export const STAND_IN = 'old bundle';

/** Follows a site from now on with the bundle that serves now; catches up on what was said so far. */
export class StandIn {
  readonly scorer: Scorer;
  private readonly paths = new Map<number, Float64Array>();

  constructor(site: SiteRun) {
    const old = site.serving;
    const shadow = new Shadow(old.bundle);
    const period = site.perDay;
    this.scorer = new Scorer({
      signals: site.signalNames.length,
      horizon: old.bundle.horizon,
      period,
      firstTick: site.playTick,
    });
    site.said.forEach((said, k) => {
      shadow.follow(site.playTick + k, said);
      this.scorer.addReadings(said);
    });
    site.onTick = (tick, said) => {
      this.paths.set(tick, shadow.follow(tick, said));
      this.scorer.addReadings(said);
    };
    site.onForecast = (origin, digest) => {
      const path = this.paths.get(origin);
      if (path === undefined || digest === old.digest) return;
      this.paths.delete(origin);
      this.scorer.addForecast(origin, STAND_IN, path);
    };
  }
}
