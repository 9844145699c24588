/** Follows the messages of one site and keeps the newest of each kind. */
import {
  type ForecastMessage,
  type HealthMessage,
  parseForecastMessage,
  parseHealthMessage,
  parseStateMessage,
  parseTopic,
  type StateMessage,
  topicsOf,
} from '@stillwell/protocol';
import { clientIdFor, connectBroker, subscribeTo } from '../broker.ts';
import { TrainError } from '../errors.ts';
import { printable } from '../text-table.ts';
import type { WatchedSite } from './watch-view.ts';

/** Whom to follow, and whom to tell. */
export interface WatchOptions {
  readonly broker: string;
  readonly root: string;
  readonly site: string;
  /** Called after every message taken in; `signal` where it was a forecast. */
  readonly onChange: (site: WatchedSite, signal: string | null) => void;
  /** A message that could not be read, or a change of the connection. */
  readonly onTrouble: (text: string) => void;
  readonly connectTimeoutMs?: number;
}

/**
 * Subscribes and follows until `stop`.
 *
 * throws  TrainError 'broker' when it cannot connect or subscribe
 */
export async function followSite(options: WatchOptions): Promise<{ stop(): Promise<void> }> {
  const topics = topicsOf(options.root, options.site);
  const forecasts = new Map<string, ForecastMessage>();
  let state: StateMessage | null = null;
  let health: HealthMessage | null = null;
  const take = (topic: string, payload: Uint8Array): void => {
    const parsed = parseTopic(options.root, topic);
    let signal: string | null = null;
    try {
      if (parsed?.kind === 'forecast') {
        const forecast = own(parseForecastMessage(payload), options.site);
        checkSignal(forecast.signal, parsed.signal);
        signal = forecast.signal;
        forecasts.set(signal, forecast);
      } else if (parsed?.kind === 'state') state = own(parseStateMessage(payload), options.site);
      else if (parsed?.kind === 'health') health = own(parseHealthMessage(payload), options.site);
      else return;
    } catch (error) {
      options.onTrouble(printable(`${topic}: ${(error as Error).message}`));
      return;
    }
    options.onChange({ site: options.site, forecasts, state, health }, signal);
  };
  let isFollowing = false;
  const connection = await connectBroker({
    url: options.broker,
    clientId: clientIdFor('watch'),
    onMessage: take,
    ...(options.connectTimeoutMs === undefined ? {} : { connectTimeoutMs: options.connectTimeoutMs }),
    onState: (event) => {
      // Until the first connect the refusal itself tells what is wrong.
      if (event.kind === 'connected') isFollowing = true;
      if (event.kind === 'lost' && isFollowing) options.onTrouble(`broker lost: ${event.reason}; trying again`);
    },
  });
  // The state first: with it the first forecast already shows the value now.
  for (const filter of [topics.health, topics.state, topics.forecast('+')]) await subscribeTo(connection, [filter]);
  return { stop: () => connection.end() };
}

/** A message of another site on this site's topic must not be shown as this site's. */
function own<T extends { readonly site: string }>(message: T, site: string): T {
  if (message.site === site) return message;
  throw new TrainError('broker', `expected a message of site "${site}", got one of "${message.site}"; passed over`);
}

function checkSignal(named: string, topic: string | null): void {
  if (named === topic) return;
  throw new TrainError('broker', `expected a forecast of signal "${topic}", got one of "${named}"; passed over`);
}
