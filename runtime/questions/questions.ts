/**
 * Takes questions from the broker and answers them: on the asker's response topic where MQTT 5 gives one below our own
 * `answers/`, else on `answers/{asker}`; QoS 1, not retained. Every question is answered, refused in an answer where somebody
 * is known to wait for one, or dropped; health counts each by its cause.
 */
import {
  type AnswerTo,
  MAX_MESSAGE_BYTES,
  ProtocolError,
  parseQuestion,
  type Question,
  type Refusal,
  refusalMessage,
  type Site,
  type SiteTopics,
} from '@stillwell/protocol';
import type { Log } from '../log.ts';
import type { IncomingPacket, Outgoing } from '../mqtt/connection.ts';
import type { Occasion } from '../publish/moment.ts';
import type { Serving } from '../serving.ts';
import { Allowances } from './allowances.ts';
import { Answerer } from './answer.ts';
import { MAX_CORRELATION_BYTES, responseTopicFault } from './response-topic.ts';

const JSON_TYPE = 'application/json';
/** How long a refusal is worth reading. */
const REFUSAL_HOLDS_MS = 60_000;

/** Why a question got no forecast. */
export type QuestionCause =
  | 'size'
  | 'syntax'
  | 'fields'
  | 'plan'
  | 'retained'
  | 'response-topic'
  | 'correlation-data'
  | 'asker-rate'
  | 'rate'
  | 'flood'
  | 'no-forecast'
  | 'too-large';

/** What questions are answered from, and where answers go. */
export interface QuestionPorts {
  readonly site: Site;
  readonly gateway: string;
  readonly topics: SiteTopics;
  readonly log: Log;
  /** ms of a clock that never steps back. */
  readonly monotonic: () => number;
  /** The forecast that stands and its occasion; null: there is none. */
  readonly present: () => { readonly serving: Serving; readonly occasion: Occasion } | null;
  /** The present moment, ms since 1970; null: not known. */
  readonly nowMs: () => number | null;
  readonly publish: (message: Outgoing) => Promise<void>;
}

/** Where one answer goes. */
type Reply = Pick<Outgoing, 'topic' | 'correlationData'>;

/** See the file head. */
export class Questions {
  /** Since the start. */
  answered = 0;
  readonly #ports: QuestionPorts;
  readonly #allowances: Allowances;
  readonly #answerer = new Answerer();
  readonly #refused = new Map<QuestionCause, number>();

  constructor(ports: QuestionPorts) {
    this.#ports = ports;
    this.#allowances = new Allowances(ports.monotonic);
  }

  /** Questions without a forecast since the start, by cause. */
  get refused(): Readonly<Record<string, number>> {
    return Object.fromEntries(this.#refused);
  }

  /** Takes one message in. */
  take(payload: Uint8Array, packet: Pick<IncomingPacket, 'retain' | 'responseTopic' | 'correlationData'>): void {
    // A retained question would be asked anew at every reconnect, by nobody who waits.
    if (packet.retain) this.#count('retained');
    else if (!this.#allowances.mayRead()) this.#count('flood');
    else this.#read(payload, packet);
  }

  #read(payload: Uint8Array, packet: Pick<IncomingPacket, 'responseTopic' | 'correlationData'>): void {
    const { site, topics, nowMs, present } = this.#ports;
    const { responseTopic, correlationData } = packet;
    const now = present();
    const topicFault = responseTopic === null ? null : responseTopicFault(topics, responseTopic);
    const hasMark = correlationData !== null && correlationData.length <= MAX_CORRELATION_BYTES;
    const replyTo = (asker: string): Reply => ({
      topic: responseTopic === null || topicFault !== null ? topics.answers(asker) : responseTopic,
      ...(hasMark ? { correlationData } : {}),
    });
    let question: Question;
    try {
      const startMs = ((now?.serving.tick ?? Math.floor((nowMs() ?? 0) / site.tickMs)) + 1) * site.tickMs;
      question = parseQuestion(payload, { site, nowMs: nowMs(), startMs });
    } catch (error) {
      const { reason, asker } = error instanceof ProtocolError ? error.details : {};
      const cause = typeof reason === 'string' ? (reason as QuestionCause) : 'syntax';
      const reply = typeof asker === 'string' ? replyTo(asker) : null;
      this.#refuse(reply, String(asker), null, { cause, reason: (error as Error).message });
      return;
    }
    const { asker, id } = question;
    const refusal = this.#refusalOf(question, topicFault, correlationData, now !== null);
    if (refusal !== null) this.#refuse(replyTo(asker), asker, id, refusal);
    else this.#answer(replyTo(asker), question, now!);
  }

  /** Why a readable question gets no forecast, cheapest question first; null: it gets one. */
  #refusalOf(
    { asker }: Question,
    topicFault: string | null,
    mark: Uint8Array | null,
    isForecast: boolean,
  ): (Refusal & { readonly cause: QuestionCause }) | null {
    if (topicFault !== null) return { cause: 'response-topic', reason: topicFault };
    if (mark !== null && mark.length > MAX_CORRELATION_BYTES) {
      const reason = `correlation data: expected at most ${MAX_CORRELATION_BYTES} bytes, got ${mark.length}`;
      return { cause: 'correlation-data', reason };
    }
    if (!isForecast) return { cause: 'no-forecast', reason: 'no bundle serves, or no tick has closed yet' };
    return this.#allowances.refusalOf(asker);
  }

  #answer(reply: Reply, question: Question, { serving, occasion }: { serving: Serving; occasion: Occasion }): void {
    const payload = this.#answerer.answer(serving, occasion, question);
    if (payload.length > MAX_MESSAGE_BYTES) {
      const reason = `answer of ${payload.length} bytes: expected at most ${MAX_MESSAGE_BYTES}; ask about fewer signals or steps`;
      this.#refuse(reply, question.asker, question.id, { cause: 'too-large', reason });
      return;
    }
    this.answered++;
    this.#publish(reply, payload);
  }

  #refuse(reply: Reply | null, asker: string, id: string | null, refusal: Refusal & { cause: QuestionCause }): void {
    this.#count(refusal.cause);
    if (reply === null || !this.#allowances.mayRefuse()) return;
    const { site, gateway, present, nowMs } = this.#ports;
    const checked = present()?.serving.checked ?? null;
    const issuedAtMs = nowMs() ?? 0;
    const to: AnswerTo = {
      site: site.site,
      gateway,
      bundle: checked?.digest ?? null,
      sequence: checked?.sequence ?? null,
      issuedAtMs,
      validUntilMs: issuedAtMs + REFUSAL_HOLDS_MS,
      quality: checked === null ? 'F' : null,
      qualityReason: checked === null ? 'no bundle serves' : null,
      asker,
      id,
    };
    this.#publish(reply, refusalMessage(to, refusal));
  }

  #publish(reply: Reply, payload: Uint8Array): void {
    const { publish, log } = this.#ports;
    publish({ ...reply, payload, qos: 1, retain: false, contentType: JSON_TYPE }).catch((error: Error) =>
      log.debug(error.message),
    );
  }

  #count(cause: QuestionCause): void {
    this.#refused.set(cause, (this.#refused.get(cause) ?? 0) + 1);
  }
}
