/** What came of a fleet, for a program: the same bytes for the same inputs, however many threads there were. */
import { ADVISORY } from '@stillwell/protocol';
import type { FleetResult } from './run-fleet.ts';

/** Name of the file. */
export const FLEET_JSON = 'fleet.json';
/** Changes whenever a field changes its meaning. */
const FORMAT = 1;

/** As plain values, sites in the order of the fleet. */
export function fleetJson(results: readonly FleetResult[]): Record<string, unknown> {
  return {
    format: FORMAT,
    sites: results.map(({ label, facts, problem }) =>
      facts === null ? { site: label, failed: true, problem } : { ...facts, failed: false, folder: label },
    ),
    fitted: results.filter(({ facts }) => facts !== null).length,
    with_skill: results.filter(({ facts }) => facts?.has_skill).length,
    failed: results.filter(({ facts }) => facts === null).length,
    advisory: ADVISORY,
  };
}
