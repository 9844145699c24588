/**
 * Outdoor air of an invented place: yearly and daily course, fronts that pass in days and gusts that pass in an hour.
 */
import type { Random } from '../random.ts';
import { hourOfDay } from './plant.ts';

/** Climate: temperatures in °C, humidity as a share. */
export interface Climate {
  readonly yearMean: number;
  readonly yearSwing: number;
  readonly daySwing: number;
  /** Standard deviation of the fronts. */
  readonly fronts: number;
  readonly relativeHumidity: number;
}

/** Weather in motion: departures from the course, °C. */
export interface WeatherState {
  front: number;
  gust: number;
}

const FRONT_SECONDS = 2 * 86_400;
const GUST_SECONDS = 3600;
const GUST_DEGREES = 0.35;

/** A front already under way, so that the first day is like any other. */
export function startWeather(climate: Climate, random: Random): WeatherState {
  return { front: climate.fronts * random.normal(), gust: 0 };
}

/** Advances by `seconds` and gives the temperature at `nowMs`. Warmest on 20 July and at 15 h local. */
export function stepWeather(
  climate: Climate,
  state: WeatherState,
  random: Random,
  nowMs: number,
  seconds: number,
  utcOffsetHours: number,
): number {
  state.front = wander(state.front, FRONT_SECONDS, climate.fronts, seconds, random);
  state.gust = wander(state.gust, GUST_SECONDS, GUST_DEGREES, seconds, random);
  const year = Math.cos((2 * Math.PI * (nowMs / 86_400_000 - 200)) / 365.2425);
  const day = Math.cos((2 * Math.PI * (hourOfDay(nowMs, utcOffsetHours) - 15)) / 24);
  return climate.yearMean + climate.yearSwing * year + climate.daySwing * day + state.front + state.gust;
}

/** One exact step of a mean-reverting wander of given time constant and standard deviation. */
function wander(value: number, constant: number, deviation: number, seconds: number, random: Random): number {
  const keep = Math.exp(-seconds / constant);
  return keep * value + deviation * Math.sqrt(1 - keep * keep) * random.normal();
}
