/**
 * A bundle in words and tables: what it forecasts, how well the judge found it to, where it came from, what it weighs.
 */
import { type Bundle, dequantise, encode, type Tensor } from '@stillwell/protocol';
import type { Model } from '@stillwell/runtime/filter';
import { hex, type OpenDocument } from './bundle-file.ts';
import { bytesText, shortNumber, spanText, textTable } from './text-table.ts';

/** Plain values for `--json`; times in ISO 8601, digests in hex. */
export function bundleFacts({ bundle, document, digest, model }: OpenDocument) {
  const { judge, provenance: from } = bundle;
  return {
    kind: bundle.kind,
    site: bundle.site,
    equipmentClass: bundle.equipmentClass,
    format: bundle.format,
    arithmetic: bundle.arithmetic,
    digest: hex(digest),
    schema: hex(bundle.schema),
    madeAt: new Date(bundle.madeAtMs).toISOString(),
    tickMs: bundle.tickMs,
    horizon: bundle.horizon,
    coverage: bundle.bounds.coverage,
    warmupTicks: bundle.warmupTicks,
    order: model.order,
    ...('basisCount' in model ? { basisCount: model.basisCount } : {}),
    ...('featureCount' in model ? { featuresPerChannel: model.featureCount } : {}),
    madeOf: madeOf(bundle, model),
    roundTicks: bundle.round?.ticks ?? null,
    channels: bundle.channels.map(({ name, role, unit, aggregate, lattice, clip, limits, residualScale, scale }) => ({
      name,
      role,
      unit,
      aggregate,
      lattice,
      clip,
      limits,
      residualSd: residualScale * scale,
    })),
    judge: {
      hasSkill: judge.hasSkill,
      override: judge.override,
      verdicts: judge.verdicts,
      horizons: judge.horizons,
      rivals: judge.rivals,
      signals: judgeRows(bundle),
    },
    plans: planRows(bundle),
    provenance: {
      history: hex(from.historyDigest),
      survey: hex(from.surveyDigest),
      from: new Date(from.firstMs).toISOString(),
      to: new Date(from.lastMs).toISOString(),
      ticks: from.ticks,
      previous: from.previous === null ? null : hex(from.previous),
      seed: from.seed,
      options: from.options,
      versions: from.versions,
    },
    bytes: { document: document.length, parts: partSizes(bundle) },
  };
}

/** Facts of a bundle, as `bundleFacts` gives them. */
export type BundleFacts = ReturnType<typeof bundleFacts>;

/** The facts as text for a terminal. */
export function bundleText(facts: BundleFacts): string {
  return [
    `Bundle of site ${facts.site} (class ${facts.equipmentClass}), ${facts.kind} kind`,
    `  digest      ${facts.digest}`,
    `  schema      ${facts.schema}`,
    `  made        ${facts.madeAt}, document format ${facts.format}, arithmetic ${facts.arithmetic}`,
    `  forecasts   ${facts.horizon} ticks of ${spanText(facts.tickMs)} ahead (${spanText(facts.horizon * facts.tickMs)}), ` +
      `bounds meant to hold ${Math.round(facts.coverage * 100)} %`,
    `  model       ${facts.madeOf}, warm-up ${facts.warmupTicks} ticks`,
    ...roundText(facts),
    '',
    channelTable(facts),
    '',
    judgeText(facts),
    '',
    ...(facts.plans.length === 0 ? [] : [plansText(facts), '']),
    provenanceText(facts),
    '',
    sizeText(facts),
  ].join('\n');
}

/** What the model is made of, in words. */
function madeOf({ channels, switched }: Bundle, model: Model): string {
  if (model.kind === 'driven') {
    const { memberCount, order, randomCount } = model;
    return `${memberCount} simulations of ${order / memberCount} states, ${randomCount} random features each`;
  }
  const shapes = `${model.basisCount} horizon shapes`;
  if (model.kind === 'dense') {
    const lags = model.lags.length === 0 ? '' : `, ${model.lags.length} lags a signal`;
    return `recursion of ${model.order} numbers, ${model.pairCount} of its poles complex, ${shapes}${lags}`;
  }
  const bank = `order ${model.order}, ${model.featureCount} features a channel, ${shapes}`;
  if (model.kind === 'featured') {
    return `${bank}; ${model.correctionCount} corrections from ${model.randomCount} random features`;
  }
  if (model.kind === 'linear' || switched === undefined) return bank;
  const names = (list: readonly number[]): string => list.map((i) => channels[i].name).join(', ');
  const { modes, discrete, driven, forecast } = switched;
  return `${bank}; ${modes} modes seen in ${names(discrete)}, driving ${names(driven)}, for forecasts of ${names(forecast)}`;
}

function roundText({ roundTicks, tickMs }: BundleFacts): string[] {
  if (roundTicks === null) return [];
  return [
    `  round       what was a round of ${roundTicks} ticks ago (${spanText(roundTicks * tickMs)}) is taken away first`,
  ];
}

/** What a lasting change of each planned input by one brings to each signal in the end of the horizon, in their units. */
function planRows(bundle: Bundle) {
  const { response, channels, horizon, tickMs } = bundle;
  if (response === undefined) return [];
  const signals = channels.filter(({ role }) => role === 'signal');
  const gain = dequantise(response.gain);
  const filters = response.decays.length + 2;
  const np = response.inputs.length;
  return response.inputs.flatMap((u, p) => {
    const input = channels[signals.length + u];
    return signals.map((signal, i) => {
      const steps = horizon - response.delay[i * np + p];
      const at = (i * np + p) * filters;
      const poles = response.decays.reduce((sum, a, b) => sum + gain[at + 1 + b] * (1 - a ** steps), 0);
      const lasting = gain[at] + poles + (gain[at + filters - 1] * steps) / horizon;
      return {
        input: input.name,
        signal: signal.name,
        deadTimeMs: response.delay[i * np + p] * tickMs,
        effectPerUnit: (lasting * signal.scale) / input.scale,
        usualError: response.surprise[p] * input.scale,
      };
    });
  });
}

function plansText(facts: BundleFacts): string {
  const head = ['plan of', 'changes', 'after', 'by, for one more up to the horizon', 'usual error without a plan'];
  const rows = facts.plans.map(({ input, signal, deadTimeMs, effectPerUnit, usualError }) => [
    input,
    signal,
    spanText(deadTimeMs),
    shortNumber(effectPerUnit, 3),
    shortNumber(usualError, 3),
  ]);
  return textTable(head, rows, [2, 3, 4]);
}

function channelTable(facts: BundleFacts): string {
  const rows = facts.channels.map((channel) => [
    channel.name,
    channel.role,
    channel.unit,
    shortNumber(channel.lattice.step, 6),
    channel.aggregate,
    `${shortNumber(channel.clip[0], 5)} .. ${shortNumber(channel.clip[1], 5)}`,
    shortNumber(channel.residualSd),
    limitsText(channel.limits),
  ]);
  const head = ['channel', 'role', 'unit', 'step', 'tick takes', 'clipped to', 'one-step sd', 'limits'];
  return textTable(head, rows, [3, 6]);
}

function limitsText(limits: BundleFacts['channels'][number]['limits']): string {
  const names = { lowLow: 'low-low', low: 'low', high: 'high', highHigh: 'high-high' } as const;
  const set = Object.entries(names).flatMap(([key, name]) => {
    const value = limits[key as keyof typeof names];
    return value === null ? [] : [`${name} ${shortNumber(value, 6)}`];
  });
  return set.join(', ') || '-';
}

function judgeText(facts: BundleFacts): string {
  const { judge } = facts;
  const head = ['signal', 'steps', 'mse', ...judge.rivals.map((rival) => `skill over ${rival}`), 'coverage'];
  const rows = judge.signals.map((row) => [
    row.signal,
    String(row.step),
    shortNumber(row.mse),
    ...row.skill.map((skill) => shortNumber(skill, 3)),
    shortNumber(row.coverage, 3),
  ]);
  const right = head.map((_, i) => i).slice(1);
  const verdict =
    judge.override === null
      ? judge.hasSkill
        ? 'The judge found skill on time it had not seen (mse in signals standardised by the learning part):'
        : 'The judge found NO skill on time it had not seen:'
      : `The judge found no skill; sealed all the same: "${judge.override}"`;
  return [verdict, textTable(head, rows, right), ...judge.verdicts.map((sentence) => `  ${sentence}`)].join('\n');
}

function provenanceText({ provenance: from }: BundleFacts): string {
  return [
    'Learned from',
    `  history     ${from.from} to ${from.to}, ${from.ticks} ticks, digest ${from.history.slice(0, 16)}…`,
    `  survey      ${from.survey.slice(0, 16)}…`,
    `  refit of    ${from.previous ?? 'none, a first fit'}`,
    `  seed ${from.seed}, options ${from.options}`,
    `  versions    ${Object.entries(from.versions)
      .map(([name, version]) => `${name} ${version}`)
      .join(', ')}`,
  ].join('\n');
}

function sizeText({ bytes }: BundleFacts): string {
  const parts = Object.entries(bytes.parts).map(([part, size]) => `${part} ${bytesText(size)}`);
  return `Document ${bytesText(bytes.document)}: ${parts.join(', ')}`;
}

function judgeRows(bundle: Bundle) {
  const { judge } = bundle;
  const signals = bundle.channels.filter((channel) => channel.role === 'signal');
  const steps = judge.horizons.length;
  const [mse, skill, coverage] = [judge.mse, judge.skill, judge.coverage].map((tensor: Tensor) => dequantise(tensor));
  return signals.flatMap(({ name }, i) =>
    judge.horizons.map((step, k) => ({
      signal: name,
      step,
      mse: mse![i * steps + k]!,
      skill: judge.rivals.map((_, j) => skill![(i * judge.rivals.length + j) * steps + k]!),
      coverage: coverage![i * steps + k]!,
    })),
  );
}

/** Encoded bytes of each top-level field that is worth a word, the rest together. */
function partSizes(bundle: Bundle): Record<string, number> {
  const { linear, dense, features, switched, driven } = bundle;
  const kinds = { recursion: dense, 'random features': features, modes: switched, simulations: driven };
  const named = {
    ...(linear === undefined
      ? {}
      : { bottleneck: linear.bottleneck, 'read-out': linear.readout, 'horizon shapes': linear.horizonBasis }),
    ...(linear?.own === undefined ? {} : { 'own part': linear.own }),
    ...Object.fromEntries(Object.entries(kinds).filter(([, section]) => section !== undefined)),
    ...(bundle.response === undefined ? {} : { plans: bundle.response }),
    bounds: bundle.bounds,
    seasonal: bundle.seasonal,
    channels: bundle.channels,
    judge: bundle.judge,
    provenance: bundle.provenance,
  };
  return Object.fromEntries(Object.entries(named).map(([part, value]) => [part, encode(value).length]));
}
