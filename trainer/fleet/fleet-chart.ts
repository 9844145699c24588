/** The small plots of the fleet's page. */
import * as Plot from '@observablehq/plot';
import { chart, palette } from '../report/chart.ts';
import type { SiteFacts } from './site-facts.ts';

/** Skill beside coverage, a dot a site. */
export function fleetChart(fitted: readonly SiteFacts[]): string {
  const points = fitted.flatMap(({ site, mean_skill: skill, coverage, has_skill: hasSkill }) =>
    skill === null || coverage === null ? [] : [{ site, skill: 100 * skill, coverage: 100 * coverage, hasSkill }],
  );
  const nominal = 100 * (fitted[0]?.nominal_coverage ?? 0.9);
  return chart(
    {
      width: 640,
      height: 240,
      marginLeft: 50,
      x: { label: 'skill (%)', grid: true, domain: spread(points.map(({ skill }) => skill).concat(0), 5) },
      y: {
        label: 'coverage (%)',
        grid: true,
        domain: spread(points.map(({ coverage }) => coverage).concat(nominal), 3),
      },
      marks: [
        Plot.ruleX([0], { stroke: '#999' }),
        Plot.ruleY([nominal], { stroke: palette.nominal, strokeDasharray: '4 3' }),
        Plot.dot(points, {
          x: 'skill',
          y: 'coverage',
          r: 4,
          fill: (point: { hasSkill: boolean }) => (point.hasSkill ? palette.ours : palette.nominal),
          fillOpacity: 0.75,
          title: 'site',
        }),
      ],
    },
    'Skill and coverage of each site',
  );
}

/** Ends of an axis that holds all values with some room, and is never of no length. */
function spread(values: readonly number[], room: number): [number, number] {
  return [Math.floor(Math.min(...values) - room), Math.ceil(Math.max(...values) + room)];
}

const WIDTH = 120;
const HEIGHT = 28;

/** Skill from the first step to the furthest, drawn by hand: a thousand of them must not take long. */
export function skillSpark({ site, skill_by_step: curve }: SiteFacts): string {
  const shown = curve.filter((point): point is { step: number; skill: number } => point.skill !== null);
  if (shown.length === 0) return '–';
  const last = Math.max(2, ...curve.map(({ step }) => step));
  const low = Math.min(0, ...shown.map(({ skill }) => skill));
  const y = (skill: number): string => (2 + ((1 - skill) / (1 - low)) * (HEIGHT - 4)).toFixed(1);
  const x = (step: number): string => (2 + ((step - 1) / (last - 1)) * (WIDTH - 4)).toFixed(1);
  const line = shown.map(({ step, skill }) => `${x(step)},${y(skill)}`).join(' ');
  const end = shown.at(-1) as { step: number; skill: number };
  return `<svg width="${WIDTH}" height="${HEIGHT}" viewBox="0 0 ${WIDTH} ${HEIGHT}" role="img" aria-label="Skill of ${site} by distance">
<line x1="0" x2="${WIDTH}" y1="${y(0)}" y2="${y(0)}" stroke="#999" stroke-width="1"/><polyline points="${line}" fill="none" stroke="${palette.ours}" stroke-width="1.8"/><circle cx="${x(end.step)}" cy="${y(end.skill)}" r="2.2" fill="${palette.ours}"/></svg>`;
}
