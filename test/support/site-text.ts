/** A good site file as text, and the same with one piece exchanged. */

export const GOOD = `# two pumps
site: mill-lane
class: wet-well
time_zone: Europe/Vienna
tick: 1min
horizon: 2h
lateness: 5s
signals:
  - name: level
    topic: plant/well/level
    payload: {json: /value, time: /ts}
    unit: m
    resolution: 0.01
    range: [0, 6]
    aggregate: last
    limits: {high_high: 5.5, high: 5, low: 0.5, low_low: 0.25}
    column: "Level (m)"
  - name: inflow
inputs:
  - name: rain
    topic: weather/+/rain
    payload: number
    unit: mm/h
    aggregate: sum
    plan_topic: weather/plan/rain
calendar:
  holidays: ["2026-12-25"]
`;

/** The good file with one piece of text exchanged; the piece must be there. */
export const edited = (from: string, to: string): string => {
  if (!GOOD.includes(from)) throw new Error(`the sample has no ${from}`);
  return GOOD.replace(from, to);
};
