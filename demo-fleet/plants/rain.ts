/**
 * Rain over a catchment and what it brings to the sewer: storms arrive at random, each a triangle of intensity; the
 * catchment answers as a linear reservoir. Short and synthetic: no climate of any real place.
 */
import type { Random } from '../random.ts';

/** Climate and catchment. */
export interface Rain {
  /** Mean days between storms, mean hours a storm lasts, mean depth of one in mm. */
  readonly daysBetween: number;
  readonly hoursLong: number;
  readonly depth: number;
  /** Paved area that drains to the well, m², and the reservoir's time constant, s. */
  readonly pavedArea: number;
  readonly lagSeconds: number;
}

/** Storms and runoff in motion. */
export interface RainState {
  /** Intensity now, mm/s. */
  intensity: number;
  /** Runoff now, m³/s. */
  runoff: number;
  stormFrom: number;
  stormSeconds: number;
  stormDepth: number;
  /** Rain fallen in all, mm. */
  fallen: number;
}

/** Dry, with the first storm drawn; `now` in seconds. */
export function startRain(rain: Rain, random: Random, now: number): RainState {
  const state = { intensity: 0, runoff: 0, stormFrom: 0, stormSeconds: 0, stormDepth: 0, fallen: 0 };
  drawStorm(rain, state, random, now);
  return state;
}

/** Advances by `seconds` from `now` (s); the reservoir is stepped exactly for constant intensity. */
export function stepRain(rain: Rain, state: RainState, random: Random, now: number, seconds: number): void {
  const into = now + seconds / 2 - state.stormFrom;
  if (into > state.stormSeconds) drawStorm(rain, state, random, now);
  const share = into / state.stormSeconds;
  const peak = (2 * state.stormDepth) / state.stormSeconds;
  // Rises for a third of the storm, falls for two thirds; the area of the triangle is the depth.
  state.intensity = share < 0 || share > 1 ? 0 : peak * (share < 1 / 3 ? share * 3 : (1 - share) * 1.5);
  state.fallen += state.intensity * seconds;
  const keep = Math.exp(-seconds / rain.lagSeconds);
  state.runoff = keep * state.runoff + (1 - keep) * (state.intensity / 1000) * rain.pavedArea;
}

function drawStorm(rain: Rain, state: RainState, random: Random, now: number): void {
  state.stormFrom = now + random.exponential(rain.daysBetween * 86_400);
  state.stormSeconds = 1200 + random.exponential(rain.hoursLong * 3600);
  state.stormDepth = 0.4 + random.exponential(rain.depth);
}
