/**
 * One bundle of every kind for tests of what all kinds must do, each with all that its kind may have: own part, level, round,
 * response to plans, every guard, tracked bounds. Synthetic but for the switched one, which is learned.
 */
import { createHash } from 'node:crypto';
import { type Bundle, bundleSchemaHash, encodeBundle } from '@stillwell/protocol';
import { type Model, modelFromBundle, runProbe } from '@stillwell/runtime/filter';
import { syntheticDenseBundle } from './dense-models.ts';
import { syntheticDrivenBundle, syntheticFeaturedBundle } from './feature-models.ts';
import { type ModelChoice, syntheticBundle } from './models.ts';
import { onLattice, roughReadings } from './rough-readings.ts';
import { tankBundle } from './switched-model.ts';
import { tankHistory } from './switched-plant.ts';

/** Ticks of the rounds. */
export const ROUND_TICKS = 30;
const PROBE_TICKS = 80;

/** Names of the bundles; the first word of each is its kind. */
export const EVERY_KIND = [
  'linear',
  'linear with all it may have',
  'linear with a round',
  'dense',
  'dense with a round',
  'featured',
  'featured with a round',
  'switched',
  'driven',
] as const;

/** One of them. */
export type KindName = (typeof EVERY_KIND)[number];

const SMALL: ModelChoice = { inputs: ['pump'], horizon: 24, order: 6, lags: [1, 3, 24], warmupTicks: 5 };

/** A bundle with a schema and a probe that hold; a choice does not touch the switched one, whose signals are its plant's. */
export function bundleOfKind(name: KindName, choice: ModelChoice = {}): Bundle {
  const given = { ...SMALL, ...choice };
  const all = { ...given, level: true, own: true, response: true } as const;
  const drafts: Readonly<Record<KindName, () => Bundle>> = {
    linear: () => syntheticBundle(given),
    'linear with all it may have': () => guarded(withRound(syntheticBundle(all))),
    'linear with a round': () => withRound(syntheticBundle(given)),
    dense: () => guarded(syntheticDenseBundle({ ...given, level: true })),
    'dense with a round': () => withRound(syntheticDenseBundle(given)),
    featured: () => guarded(syntheticFeaturedBundle({ ...all, seed: 2 })),
    'featured with a round': () => withRound(syntheticFeaturedBundle({ ...given, seed: 2 })),
    switched: () => guarded(tankBundle()),
    driven: () => guarded(syntheticDrivenBundle(given)),
  };
  return proven(drafts[name]());
}

/** The model of `bundleOfKind(name)`. */
export function modelOfKind(name: KindName, choice: ModelChoice = {}): Model {
  return modelFromBundle(bundleOfKind(name, choice));
}

/** The bundle with the schema hash and the probe that belong to it. */
export function proven(draft: Bundle): Bundle {
  const { outputs, last } = runProbe(modelFromBundle(draft), 5, PROBE_TICKS);
  const digest = new Uint8Array(createHash('sha256').update(outputs).digest());
  return { ...draft, schema: bundleSchemaHash(draft), probe: { seed: 5, ticks: PROBE_TICKS, digest, last } };
}

/** Its document. */
export function documentOfKind(name: KindName, choice: ModelChoice = {}): Uint8Array {
  return encodeBundle(bundleOfKind(name, choice));
}

/** A round for the first signal, half of one for the second. */
function withRound(bundle: Bundle): Bundle {
  const signals = bundle.channels.filter(({ role }) => role === 'signal').length;
  const weight = Array.from({ length: signals }, (_, i) => [1, 0.5, 0][i % 3]!);
  return { ...bundle, round: { ticks: ROUND_TICKS, weight } };
}

/** Guards against jumps and sensors that hang, and bounds as newer bundles track them. */
function guarded(bundle: Bundle): Bundle {
  const signals = bundle.channels.filter(({ role }) => role === 'signal');
  return {
    ...bundle,
    guard: {
      ...bundle.guard,
      confirmsJumps: true,
      bridgesGaps: true,
      stuck: signals.map(() => 6),
      rests: signals.map((_, i) => (i === 0 ? [] : [bundle.channels[i]!.clip[0]])),
      stuckActs: true,
    },
    bounds: { ...bundle.bounds, longRate: 1, crossingFresh: 0.5 },
  };
}

/** Rough readings for a kind's model; those of its own plant for the switched one, with a silence and a hanging sensor. */
export function readingsOfKind(name: KindName, model: Model, ticks: number, seed: number): Float64Array[] {
  if (name !== 'switched') return roughReadings(model, ticks, seed);
  const [level, current] = tankHistory({ ticks, seed, missing: 0.1 });
  return Array.from({ length: ticks }, (_, n) => {
    const isSilent = n % 300 >= 200 && n % 300 < 290;
    const from = n % 90 < 15 ? n - (n % 90) : n;
    return Float64Array.of(level![from]!, current![n]!).map((value, c) =>
      isSilent ? Number.NaN : onLattice(model, c, value),
    );
  });
}
