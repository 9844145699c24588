/** Looks through what a fit left behind for numbers that are none. */
import { expect } from 'vitest';
import type { Bundle } from '../../protocol/index.ts';
import { dequantise, type Tensor } from '../../protocol/tensor.ts';

const isTensor = (value: object): value is Tensor => 'type' in value && 'rows' in value && 'data' in value;

/** Paths of numbers in a plain value that are not finite, tensors included. */
export function notFinite(value: unknown, path = ''): string[] {
  if (typeof value === 'number') return Number.isFinite(value) ? [] : [path];
  if (typeof value !== 'object' || value === null || value instanceof Uint8Array) return [];
  if (isTensor(value)) return dequantise(value).every(Number.isFinite) ? [] : [path];
  return Object.entries(value).flatMap(([key, one]) => notFinite(one, `${path}/${key}`));
}

/** Every number of a bundle is one. */
export function expectFiniteBundle(bundle: Bundle): void {
  expect(notFinite(bundle)).toEqual([]);
}

interface Cell {
  readonly step: number;
  readonly count: number;
  readonly [figure: string]: unknown;
}

const FIGURES = ['mse', 'mae', 'bias', 'mse_standardised', 'mae_standardised', 'coverage', 'width'] as const;

/** Every figure of a hindcast.json that something was counted for is a number: JSON writes null for what is none. */
export function expectFiniteHindcast(json: {
  readonly average: unknown;
  readonly signals: readonly { readonly signal: string; readonly horizons: readonly Cell[] }[];
}): void {
  const bad = json.signals.flatMap(({ signal, horizons }) =>
    horizons.flatMap((cell) => {
      const figures = Object.fromEntries(FIGURES.map((name) => [name, cell[name]]));
      const own = cell.count > 0 ? nulls(figures) : [];
      const rivals = cell.count > 0 ? nulls(cell.rivals).filter((path) => !path.endsWith('/skill')) : [];
      return [...own, ...rivals].map((path) => `${signal} step ${cell.step}${path}`);
    }),
  );
  expect([...bad, ...nulls(json.average)]).toEqual([]);
  expect(json.signals.some(({ horizons }) => horizons.some(({ count }) => count > 0))).toBe(true);
}

function nulls(value: unknown, path = ''): string[] {
  if (value === null || value === undefined) return [path];
  if (typeof value !== 'object') return typeof value === 'number' && !Number.isFinite(value) ? [path] : [];
  return Object.entries(value).flatMap(([key, one]) => nulls(one, `${path}/${key}`));
}
