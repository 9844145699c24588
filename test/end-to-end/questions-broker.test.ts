/** Questions over a real broker: answered to the asker, on MQTT 5 also where it says; refused elsewhere, counted in health. */
import { type AnswerMessage, parseAnswerMessage, parseHealthMessage, topicsOf } from '@stillwell/protocol';
import { type Connection, type IncomingPacket, openConnection } from '@stillwell/runtime/mqtt';
import { describe, expect, onTestFinished, test, vi } from 'vitest';
import { systemClock } from '../../runtime/clock.ts';
import { nodeDisk } from '../../runtime/disk.ts';
import { Gateway } from '../../runtime/gateway.ts';
import { askCommand } from '../../trainer/commands/ask.ts';
import { mosquittoMissing, startAedes, startMosquitto, type TestBroker } from '../support/broker.ts';
import { hearing } from '../support/command.ts';
import { testFolder } from '../support/folder.ts';
import { plantMessages, SITE_NAME, sealedOf, site, trusted } from '../support/running-site.ts';
import { until } from '../support/until.ts';

const topics = topicsOf(site.root, SITE_NAME);

const hear = hearing();

async function stage(broker: TestBroker) {
  const silent = { debug: () => {}, info: () => {}, warn: () => {}, error: () => {} };
  const gateway = new Gateway(
    {
      site,
      gateway: 'g1',
      data: testFolder(),
      broker: { url: broker.url, protocol: 'auto', username: null, password: null, tls: {} },
      trusted,
      clock: 'readings',
      segmentTicks: 60,
      spoolBytes: 1e8,
      healthSeconds: 1,
    },
    { clock: systemClock, disk: nodeDisk, log: silent, firstRetryMs: 60, willDelaySeconds: 0 },
  );
  onTestFinished(() => gateway.abandon());
  const answers: { topic: string; message: AnswerMessage; packet: IncomingPacket }[] = [];
  const elsewhere: string[] = [];
  let health: Uint8Array | null = null;
  const asker: Connection = openConnection({
    url: broker.url,
    clientId: 'asker',
    protocol: 'auto',
    onMessage: (topic, payload, packet) => {
      if (topic === topics.health) health = payload;
      else if (topic.startsWith(topics.answers('')))
        answers.push({ topic, message: parseAnswerMessage(payload), packet });
      else elsewhere.push(topic);
    },
  });
  onTestFinished(() => asker.end(true));
  await asker.subscribe([topics.answers('#'), topics.health, 'plant/pump/set']);
  await until('connected', () => gateway.isConnected);
  const ask = (question: object, more: object = {}): Promise<void> =>
    asker.publish({ topic: topics.questions, payload: JSON.stringify(question), qos: 1, retain: false, ...more });
  const counters = () => parseHealthMessage(health!).counters;
  return { gateway, asker, answers, elsewhere, ask, counters };
}

const brokers: readonly (readonly [string, () => Promise<TestBroker>, string | null])[] = [
  ['aedes, MQTT 3.1.1', () => startAedes(), null],
  ['mosquitto, MQTT 5', () => startMosquitto(), mosquittoMissing],
];

describe.each(brokers)('on %s', (_, startBroker, missing) => {
  test.skipIf(missing !== null)(
    'asked and answered',
    async () => {
      const broker = await startBroker();
      onTestFinished(() => broker.stop());
      const { gateway, asker, answers, elsewhere, ask, counters } = await stage(broker);
      await ask({ asker: 'hmi', plans: { pump: 12 } });
      await until('a refusal', () => answers.length === 1);
      expect(answers[0]!.message).toMatchObject({ outcome: 'refused', cause: 'no-forecast', quality: 'F' });

      gateway.offerBundle(sealedOf(1, { response: true }), 'by hand');
      for (const { topic, payload } of plantMessages(20).flat())
        await asker.publish({ topic, payload, qos: 1, retain: false });
      await until('forecasts', () => (gateway.engine.serving?.tick ?? 0) > 0);
      await ask({ asker: 'hmi', id: 'q2', plans: { pump: 12 }, horizon: '10min', signals: ['level'] });
      await until('an answer', () => answers.length === 2);
      const { topic, message, packet } = answers[1]!;
      expect(topic).toBe(topics.answers('hmi'));
      expect(packet.retain).toBe(false);
      expect(message).toMatchObject({
        outcome: 'answered',
        asker: 'hmi',
        id: 'q2',
        inputs_ahead: [{ use: 'planned' }],
      });
      expect(message.signals).toMatchObject([{ signal: 'level', unit: 'm' }]);
      expect(message.signals![0]!.median).toHaveLength(10);
      expect(message.signals![0]!.present.median).toHaveLength(10);

      // A mark and a place of its own, where the protocol has them.
      const isNew = asker.protocol === 5;
      const correlationData = Uint8Array.of(7, 0, 255);
      await ask(
        { asker: 'hmi', plans: { pump: 12 } },
        { responseTopic: topics.answers('hmi/window-3'), correlationData },
      );
      await until('an answer there', () => answers.length === 3);
      expect(answers[2]!.topic).toBe(topics.answers(isNew ? 'hmi/window-3' : 'hmi'));
      expect(answers[2]!.packet.correlationData === null ? null : [...answers[2]!.packet.correlationData]).toEqual(
        isNew ? [7, 0, 255] : null,
      );

      // Nobody can make the gateway command the plant.
      await ask({ asker: 'hmi', plans: { pump: 12 } }, { responseTopic: 'plant/pump/set', correlationData });
      await until('an answer or a refusal', () => answers.length === 4);
      expect(answers[3]!.topic).toBe(topics.answers('hmi'));
      expect(answers[3]!.message.cause).toBe(isNew ? 'response-topic' : undefined);
      await until('health', () => counters().questions === (isNew ? 2 : 3), 5000);
      expect(counters().questions_refused).toEqual(
        isNew ? { 'no-forecast': 1, 'response-topic': 1 } : { 'no-forecast': 1 },
      );
      expect(elsewhere).toEqual([]);

      // From a shell.
      const from = ['--broker', broker.url, '--site', SITE_NAME];
      const shown = await hear(askCommand(), ...from, '--plan', 'pump=12', '--signal', 'level', '--horizon', '10min');
      expect(shown).toMatch(
        /^marsh-lane: bundle number 1, origin [^\n]*\ninputs in the answer: pump planned\n\nlevel in m\n/,
      );
      const line = JSON.parse(await hear(askCommand(), ...from, '--plan', 'pump=none', '--json')) as AnswerMessage;
      expect(line).toMatchObject({ outcome: 'answered', inputs_ahead: [{ input: 'pump', use: 'expected' }] });
      expect(line.signals!.map(({ median, present }) => [median, present.median])).toEqual(
        line.signals!.map(({ median }) => [median, median]),
      );
      await expect(hear(askCommand(), ...from, '--plan', 'pmup=1')).rejects.toThrow(
        'marsh-lane refused (fields): question: plans: no such name, "pmup"; did you mean "pump"?',
      );
      // Nobody answers for a site that is not there.
      const silent = ['--broker', broker.url, '--site', 'nowhere', '--plan', 'pump=1', '--wait', '0.3'];
      const complaint = vi.spyOn(process.stderr, 'write').mockImplementation(() => true);
      await hear(askCommand(), ...silent);
      expect(complaint).toHaveBeenCalledWith(expect.stringMatching(/^stillwell: no answer of nowhere within 0.3 s; /));
      expect(process.exitCode).toBe(1);
      process.exitCode = 0;
    },
    30_000,
  );
});
