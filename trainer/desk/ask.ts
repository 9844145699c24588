/** Asks one site's gateway what the forecast would be under another plan, and waits for the answer. */
import { randomUUID } from 'node:crypto';
import { type AnswerMessage, parseAnswerMessage, topicsOf } from '@stillwell/protocol';
import { brokerError, clientIdFor, connectBroker, subscribeTo } from '../broker.ts';

/** What to ask, of whom. */
export interface AskOptions {
  readonly broker: string;
  readonly root: string;
  readonly site: string;
  /** By input, as a question has them. */
  readonly plans: Readonly<Record<string, unknown>>;
  /** Ticks or a duration; undefined: as far as the forecast reaches. */
  readonly horizon?: number | string | undefined;
  readonly signals?: readonly string[] | undefined;
  readonly waitMs: number;
  readonly connectTimeoutMs?: number;
}

/**
 * Asks; null when no answer came in time. The answer comes back under a name drawn for this question, so that nobody else's
 * is taken for it.
 *
 * throws  TrainError 'broker' when it cannot connect, subscribe or publish
 */
export async function askSite(options: AskOptions): Promise<AnswerMessage | null> {
  const { root, site, plans, horizon, signals } = options;
  const topics = topicsOf(root, site);
  const id = randomUUID();
  const asker = `ask-${id.slice(0, 8)}`;
  const topic = topics.answers(asker);
  let settle: (answer: AnswerMessage | null) => void = () => {};
  const answered = new Promise<AnswerMessage | null>((resolve) => {
    settle = resolve;
  });
  const connection = await connectBroker({
    url: options.broker,
    clientId: clientIdFor('ask'),
    onMessage: (from, payload) => {
      const answer = from === topic ? readAnswer(payload, site, id) : null;
      if (answer !== null) settle(answer);
    },
    ...(options.connectTimeoutMs === undefined ? {} : { connectTimeoutMs: options.connectTimeoutMs }),
  });
  const timer = setTimeout(() => settle(null), options.waitMs);
  try {
    await subscribeTo(connection, [topic]);
    const question = {
      asker,
      id,
      plans,
      ...(horizon === undefined ? {} : { horizon }),
      ...(signals ? { signals } : {}),
    };
    const payload = JSON.stringify(question);
    await connection.publish({ topic: topics.questions, payload, qos: 1, retain: false, responseTopic: topic });
    return await answered;
  } catch (cause) {
    throw brokerError(cause);
  } finally {
    clearTimeout(timer);
    await connection.end();
  }
}

/** The answer to our question; null: another one, or none of this version, and the time limit speaks if no other comes. */
function readAnswer(payload: Uint8Array, site: string, id: string): AnswerMessage | null {
  try {
    const answer = parseAnswerMessage(payload);
    // A refusal of what could not be read does not repeat the mark.
    return answer.site === site && (answer.id === id || answer.id === undefined) ? answer : null;
  } catch {
    return null;
  }
}
