import { expect, test } from 'vitest';
import { Acknowledgements, type Arrived } from '../../../runtime/mqtt/acknowledge.ts';

function world() {
  const sent: number[][] = [];
  const acknowledgements = new Acknowledgements((bytes) => void sent.push([...bytes]));
  const arrive = (messageId: number, qos: 0 | 1 | 2 = 1): Arrived => {
    const packet: Arrived = { cmd: 'publish', qos, messageId };
    acknowledgements.claim(packet);
    return packet;
  };
  const turn = (): Promise<void> => new Promise((resolve) => setImmediate(resolve));
  return { sent, acknowledgements, arrive, turn };
}

/** Type 4, flags 0; remaining length 2; packet id: MQTT 3.1.1 3.4, and 5.0 3.4.2.1 where all went well. */
const puback = (messageId: number): number[] => [0x40, 0x02, messageId >> 8, messageId & 255];

test('the bytes are those of the standard', async () => {
  const w = world();
  w.acknowledgements.settle(w.arrive(0x1234), undefined);
  await w.turn();
  expect(w.sent).toEqual([[0x40, 0x02, 0x12, 0x34]]);
});

test('only QoS 1 is claimed', () => {
  const w = world();
  expect(w.arrive(1).qos).toBe(0);
  expect(w.arrive(2, 2).qos).toBe(2);
  expect(w.acknowledgements.isOwed(w.arrive(3))).toBe(true);
  expect(w.acknowledgements.isOwed(w.arrive(4, 0))).toBe(false);
});

test('they leave in the order of arrival, those due together in one write', async () => {
  const w = world();
  const [first, second, third] = [w.arrive(1), w.arrive(2), w.arrive(3)];
  let release = (): void => {};
  const slow = new Promise<void>((resolve) => {
    release = resolve;
  });
  w.acknowledgements.settle(first, slow);
  w.acknowledgements.settle(second, undefined);
  await w.turn();
  expect(w.sent).toEqual([]);
  release();
  await w.turn();
  expect(w.sent).toEqual([[...puback(1), ...puback(2)]]);
  w.acknowledgements.settle(third, slow);
  await w.turn();
  expect(w.sent[1]).toEqual(puback(3));
});
