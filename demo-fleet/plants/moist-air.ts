/**
 * Moist air at sea-level pressure: saturation by Hyland and Wexler (1983) as printed in ASHRAE Fundamentals (over ice
 * below 0 °C, over water above), humidity ratio, enthalpy, density. For the load of an open door; not for metrology.
 */

/** Standard atmosphere, Pa. */
export const PRESSURE = 101_325;

/** Air as the door sees it. */
export interface MoistAir {
  /** °C. */
  readonly temperature: number;
  /** kg water per kg dry air. */
  readonly humidityRatio: number;
}

/** Saturation pressure of water vapour, Pa, at `temperature` °C from -100 to 200. */
export function saturationPressure(temperature: number): number {
  const t = temperature + 273.15;
  if (temperature < 0) {
    return Math.exp(
      -5.6745359e3 / t +
        6.3925247 -
        9.677843e-3 * t +
        6.2215701e-7 * t ** 2 +
        2.0747825e-9 * t ** 3 -
        9.484024e-13 * t ** 4 +
        4.1635019 * Math.log(t),
    );
  }
  return Math.exp(
    -5.8002206e3 / t +
      1.3914993 -
      4.8640239e-2 * t +
      4.1764768e-5 * t ** 2 -
      1.4452093e-8 * t ** 3 +
      6.5459673 * Math.log(t),
  );
}

/** Humidity ratio at a relative humidity in [0, 1]. */
export function humidityRatio(temperature: number, relativeHumidity: number): number {
  const vapour = relativeHumidity * saturationPressure(temperature);
  return (0.621945 * vapour) / (PRESSURE - vapour);
}

/** kJ per kg dry air, zero at dry air of 0 °C. */
export function enthalpy(air: MoistAir): number {
  return 1.006 * air.temperature + air.humidityRatio * (2501 + 1.86 * air.temperature);
}

/** kg moist air per m³. */
export function density(air: MoistAir): number {
  const specificVolume = (287.042 * (air.temperature + 273.15) * (1 + 1.607858 * air.humidityRatio)) / PRESSURE;
  return (1 + air.humidityRatio) / specificVolume;
}

/**
 * Heat let in through an open doorway in fully established flow, kW: Gosney and Olama (1975), as in the ASHRAE
 * Refrigeration handbook, `area` m² and `height` m of the doorway. Zero when the outside is not the warmer, lighter side.
 */
export function doorwayHeat(inside: MoistAir, outside: MoistAir, area: number, height: number): number {
  const cold = density(inside);
  const warm = density(outside);
  if (warm >= cold) return 0;
  const factor = (2 / (1 + (cold / warm) ** (1 / 3))) ** 1.5;
  const gain = enthalpy(outside) - enthalpy(inside);
  return Math.max(0, 0.221 * area * gain * cold * Math.sqrt(1 - warm / cold) * Math.sqrt(9.80665 * height) * factor);
}
