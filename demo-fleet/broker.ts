/**
 * An MQTT 3.1.1 broker inside the demo's own process, on a free loopback port: nothing to install, nothing left behind.
 * State is in memory; a demo and a test broker, not one for a plant.
 */
import { createServer, type Server, type Socket } from 'node:net';
import { Aedes } from 'aedes';

/** A running broker. */
export interface Broker {
  readonly url: string;
  readonly port: number;
  /** Client ids connected now. */
  clients(): readonly string[];
  /** Cuts every connection of a client as a broken line would: no goodbye. */
  cut(clientId: string): void;
  stop(): Promise<void>;
}

/** Starts one; `port` 0 takes any free port. */
export async function startBroker(port = 0): Promise<Broker> {
  const aedes = await Aedes.createBroker({ queueLimit: 1000, drainTimeout: 60_000 });
  const sockets = new Set<Socket>();
  const connected = new Map<string, { conn?: { destroy?: () => void } }>();
  aedes.on('clientReady', (client) => connected.set(client.id, client as never));
  aedes.on('clientDisconnect', (client) => connected.delete(client.id));
  const server = createServer((socket) => {
    // Small packets one after another: waiting to fill a segment would cost 40 ms a round trip.
    socket.setNoDelay(true);
    sockets.add(socket);
    socket.once('close', () => sockets.delete(socket));
    socket.on('error', () => socket.destroy());
    aedes.handle(socket);
  });
  const taken = await listen(server, port);
  return {
    url: `mqtt://127.0.0.1:${taken}`,
    port: taken,
    clients: () => [...connected.keys()],
    cut: (clientId) => connected.get(clientId)?.conn?.destroy?.(),
    stop: async () => {
      await new Promise<void>((resolve) => aedes.close(() => resolve()));
      for (const socket of sockets) socket.destroy();
      await new Promise<void>((resolve) => server.close(() => resolve()));
    },
  };
}

function listen(server: Server, port: number): Promise<number> {
  return new Promise((resolve, reject) => {
    server.once('error', reject);
    server.listen(port, '127.0.0.1', () => {
      const address = server.address();
      if (address === null || typeof address === 'string') reject(new Error('broker: no address after listening'));
      else resolve(address.port);
    });
  });
}
