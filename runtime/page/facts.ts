/** What the page says beside the published messages: of the site once, of the gateway again and again. */
import { ADVISORY, readSegmentHead, type Signal, toHex } from '@stillwell/protocol';
import type { Clock } from '../clock.ts';
import type { Gateway } from '../gateway.ts';
import { inputOutlooks, planFault } from '../publish/inputs.ts';
import { judge } from '../publish/quality.ts';
import { decimalsOf } from '../residuals/decimals.ts';
import type { Waiting } from '../residuals/spool.ts';
import { CLOCK_UNSET_MS } from '../steady-clock.ts';
import { VERSION } from '../version.ts';
import type { Link } from './link.ts';
import type { LoopDelay } from './loop-delay.ts';
import type { ChannelFacts, GatewayFacts, SignalFacts, SiteFacts, WarningFacts } from './told.ts';

const MOST_DECIMALS = 6;

/** What holds as long as the gateway runs with this bundle. */
export function siteFacts(gateway: Gateway): SiteFacts {
  const { config } = gateway;
  const { site } = config;
  const bundle = gateway.engine.serving?.checked.bundle ?? null;
  const channel = (one: Signal, c: number): ChannelFacts => ({
    name: one.name,
    unit: one.unit,
    decimals: decimalsShown(bundle?.channels[c]?.lattice.step ?? one.resolution),
    limits: one.limits,
  });
  return {
    site: site.site,
    class: site.equipmentClass,
    gateway: config.gateway,
    zone: site.timeZone,
    tick_ms: site.tickMs,
    horizon: gateway.engine.serving?.model.horizon ?? site.horizon,
    clock: config.clock,
    advisory: ADVISORY,
    version: VERSION,
    signals: site.signals.map(channel),
    inputs: site.inputs.map((one, u) => channel(one, site.signals.length + u)),
  };
}

/** Decimals in which a sensor's step shows; null where the step is not known. */
export function decimalsShown(step: number | null): number | null {
  if (step === null) return null;
  const decimals = decimalsOf(step);
  return decimals < 0 ? MOST_DECIMALS : Math.min(MOST_DECIMALS, decimals);
}

/** How each signal is, judged as its forecasts are. */
export function signalFacts(gateway: Gateway): SignalFacts[] {
  const { engine } = gateway;
  const { site } = engine;
  const { serving, plans, aligner } = engine;
  const nowMs = gateway.nowMs();
  const outlooks = serving === null ? [] : inputOutlooks(serving, plans, site, nowMs ?? aligner.newestMs);
  return site.signals.map(({ name }, i) => {
    const last = aligner.lastReadingMs[i]!;
    const judged =
      serving === null || serving.tick < 0
        ? { quality: 'F' as const, qualityReason: serving === null ? 'no bundle serves' : 'no tick closed yet' }
        : judge(serving, gateway.publisher.isCatchingUp, i, planFault(serving, plans, outlooks, i));
    return {
      signal: name,
      quality: judged.quality,
      reason: judged.qualityReason,
      last_ms: Number.isNaN(last) ? null : last,
    };
  });
}

function warningFacts(open: Gateway['publisher']['openWarnings'][number]): WarningFacts {
  const { signal, limit, value, probability, sinceMs, earliestMs, likelyMs, latestMs, crossedMs } = open;
  return {
    signal,
    limit,
    value,
    since_ms: sinceMs,
    probability,
    earliest_ms: earliestMs,
    likely_ms: likelyMs,
    latest_ms: latestMs,
    crossed_ms: crossedMs,
  };
}

/** Tells of a gateway; keeps what is dear to find out. */
export class Teller {
  readonly #gateway: Gateway;
  readonly #clock: Clock;
  readonly #link: Link;
  readonly #delay: LoopDelay;
  #oldestKey = '';
  #oldestMs: number | null = null;

  constructor(gateway: Gateway, clock: Clock, link: Link, delay: LoopDelay) {
    this.#gateway = gateway;
    this.#clock = clock;
    this.#link = link;
    this.#delay = delay;
  }

  /** How the gateway is now. */
  facts(): GatewayFacts {
    const nowMs = this.#clock.monotonic();
    const { engine, config, publisher } = this.#gateway;
    const checked = engine.serving?.checked ?? null;
    const oldestMs = this.#oldest(engine.spool.waiting[0]);
    const plantMs = this.#gateway.nowMs();
    return {
      bundle:
        checked === null
          ? null
          : {
              digest: toHex(checked.digest),
              sequence: checked.sequence,
              kind: checked.bundle.kind,
              made_ms: checked.bundle.madeAtMs,
              bytes: checked.bytes ?? 0,
            },
      link: { ...this.#link.facts(nowMs), reconnects: publisher.reconnects },
      spool: {
        waiting: engine.spool.waiting.length,
        bytes: engine.spool.bytes,
        most_bytes: config.spoolBytes,
        oldest_s: oldestMs === null || plantMs === null ? null : Math.max(0, (plantMs - oldestMs) / 1000),
      },
      disk_fault: engine.journal?.fault ?? null,
      clock_set: this.#clock.wall() >= CLOCK_UNSET_MS,
      up_s: process.uptime(),
      memory_bytes: process.memoryUsage.rss(),
      loop_delay_s: this.#delay.largestMs(nowMs) / 1000,
      signals: signalFacts(this.#gateway),
      warnings: publisher.openWarnings.map(warningFacts),
    };
  }

  /** Its time stands in the file, which is read once for each that becomes the oldest. */
  #oldest(entry: Waiting | undefined): number | null {
    const key = entry === undefined ? '' : `${entry.stream}-${entry.number}`;
    if (key === this.#oldestKey) return this.#oldestMs;
    this.#oldestKey = key;
    this.#oldestMs = null;
    try {
      const bytes = entry === undefined ? null : this.#gateway.engine.spool.read(entry);
      if (bytes !== null) this.#oldestMs = readSegmentHead(bytes).firstTick * this.#gateway.engine.site.tickMs;
    } catch {
      // A disk that does not give it is said elsewhere; its age then stays unknown.
    }
    return this.#oldestMs;
  }
}
