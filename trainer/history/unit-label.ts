/**
 * Units out of column headings such as "Flow [m³/h]" or "temp (°C)", as UCUM codes (ucum.org), for the headings people
 * commonly write. Anything else stays dimensionless and is left to the person who edits the site file.
 */

const UCUM: Readonly<Record<string, string>> = {
  '°C': 'Cel',
  degC: 'Cel',
  C: 'Cel',
  '°F': '[degF]',
  degF: '[degF]',
  F: '[degF]',
  K: 'K',
  '%': '%',
  '%RH': '%',
  m: 'm',
  cm: 'cm',
  mm: 'mm',
  'm³/h': 'm3/h',
  'm3/h': 'm3/h',
  'm³': 'm3',
  m3: 'm3',
  'l/s': 'L/s',
  'L/s': 'L/s',
  'l/min': 'L/min',
  bar: 'bar',
  mbar: 'mbar',
  hPa: 'hPa',
  kPa: 'kPa',
  Pa: 'Pa',
  V: 'V',
  A: 'A',
  W: 'W',
  kW: 'kW',
  MW: 'MW',
  kWh: 'kW.h',
  Hz: 'Hz',
  rpm: '{rpm}',
  s: 's',
  min: 'min',
  h: 'h',
  ppm: '[ppm]',
  'm/s': 'm/s',
  'mg/l': 'mg/L',
};

/** Heading without its unit, and the unit's code; '1' where none is told. */
export function splitHeading(heading: string): { readonly label: string; readonly unit: string } {
  const match = /^(.*?)\s*(?:\[([^\]]*)\]|\(([^)]*)\))\s*$/.exec(heading);
  const unit = match ? UCUM[(match[2] ?? match[3] ?? '').trim()] : undefined;
  return unit === undefined || !match?.[1] ? { label: heading, unit: '1' } : { label: match[1], unit };
}
