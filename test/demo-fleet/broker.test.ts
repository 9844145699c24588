import mqtt from 'mqtt';
import { afterEach, describe, expect, it } from 'vitest';
import { type Broker, startBroker } from '../../demo-fleet/broker.ts';

let broker: Broker | undefined;
afterEach(async () => {
  await broker?.stop();
  broker = undefined;
});

describe('the embedded broker', () => {
  it('takes a free port, carries a message, and frees the port', async () => {
    broker = await startBroker();
    const client = await mqtt.connectAsync(broker.url, { clientId: 'one', reconnectPeriod: 0 });
    const heard = new Promise<string>((resolve) =>
      client.on('message', (_topic, payload) => resolve(payload.toString())),
    );
    await client.subscribeAsync('a/b', { qos: 1 });
    await client.publishAsync('a/b', 'hello', { qos: 1 });
    expect(await heard).toBe('hello');
    expect(broker.clients()).toEqual(['one']);
    await client.endAsync();
    const { port } = broker;
    await broker.stop();
    broker = await startBroker(port);
    expect(broker.port).toBe(port);
  });

  it('cuts one client and leaves the other', async () => {
    broker = await startBroker();
    const one = await mqtt.connectAsync(broker.url, { clientId: 'one', reconnectPeriod: 0 });
    const two = await mqtt.connectAsync(broker.url, { clientId: 'two', reconnectPeriod: 0 });
    const closed = new Promise<void>((resolve) => one.on('close', () => resolve()));
    broker.cut('one');
    await closed;
    expect(two.connected).toBe(true);
    await two.endAsync();
    await one.endAsync(true);
  });

  it('says which port was taken', async () => {
    broker = await startBroker();
    await expect(startBroker(broker.port)).rejects.toThrow(/EADDRINUSE/);
  });
});
