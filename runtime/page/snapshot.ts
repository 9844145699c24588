/**
 * What travels from the gateway to the browser: everything when it comes, news with each tick, and between ticks how the gateway
 * is. Forecasts and health go as they are published, byte for byte, so that the page can show nothing else than what
 * subscribers get.
 */
import type { Gateway } from '../gateway.ts';
import { siteFacts } from './facts.ts';
import { pastReadings, roundTo } from './past.ts';
import { PAST_HORIZONS, type SaidBefore } from './said-before.ts';
import type { GatewayFacts, SaidThen } from './told.ts';

/** Writes the JSON of these from a gateway. */
export class SnapshotWriter {
  readonly #gateway: Gateway;
  readonly #facts: () => GatewayFacts;
  readonly #said: SaidBefore;
  readonly #page: () => string;

  constructor(gateway: Gateway, facts: () => GatewayFacts, said: SaidBefore, page: () => string) {
    this.#gateway = gateway;
    this.#facts = facts;
    this.#said = said;
    this.#page = page;
  }

  pulse(): string {
    return `{${this.#pulseFields()}}`;
  }

  /** since  last tick that was told of */
  news(forecasts: readonly Uint8Array[], since: number): string {
    const { recent } = this.#gateway.engine;
    return `{${this.#newsFields(forecasts, recent.firstTick + recent.count - 1 - since)}}`;
  }

  all(forecasts: readonly Uint8Array[]): string {
    const site = siteFacts(this.#gateway);
    const head = `"page":${JSON.stringify(this.#page())},"site":${JSON.stringify(site)}`;
    return `{${head},${this.#newsFields(forecasts, PAST_HORIZONS * site.horizon)}}`;
  }

  /** For scripts: without the past. */
  state(forecasts: readonly Uint8Array[]): string {
    return `{${this.#pulseFields()},"forecasts":[${forecasts.map(textOf).join(',')}]}`;
  }

  #pulseFields(): string {
    const at = JSON.stringify(this.#gateway.nowMs());
    return `"at":${at},"health":${textOf(this.#gateway.healthNow())},"facts":${JSON.stringify(this.#facts())}`;
  }

  #newsFields(forecasts: readonly Uint8Array[], count: number): string {
    const { signals, inputs } = siteFacts(this.#gateway);
    const decimals = [...signals, ...inputs].map((channel) => channel.decimals);
    const came = pastReadings(this.#gateway.engine.recent, Math.max(0, count), decimals.length, decimals);
    const said = this.#said.kept.map((one): SaidThen => {
      const rows = (path: Float32Array): number[][] => rowsOf(path, one.steps.length, decimals);
      const { tick, sequence, steps } = one;
      return { tick, sequence, steps, median: rows(one.median), lower: rows(one.lower), upper: rows(one.upper) };
    });
    const texts = forecasts.map(textOf).join(',');
    return `${this.#pulseFields()},"forecasts":[${texts}],"came":${JSON.stringify(came)},"said":${JSON.stringify(said)}`;
  }
}

function rowsOf(path: Float32Array, steps: number, decimals: readonly (number | null)[]): number[][] {
  return Array.from({ length: path.length / steps }, (_, i) =>
    Array.from(path.subarray(i * steps, (i + 1) * steps), (value) => roundTo(value, decimals[i] ?? null)),
  );
}

function textOf(payload: Uint8Array): string {
  return Buffer.from(payload.buffer, payload.byteOffset, payload.byteLength).toString();
}
