/**
 * The byte stream under the MQTT client: TCP or TLS without Nagle's delay, and cut as soon as a packet announces itself
 * larger than we accept. The client advertises its limit but buffers what a careless or hostile peer sends all the same.
 */
import { connect as connectTcp, isIP, type Socket } from 'node:net';
import { connect as connectTls } from 'node:tls';
import { RuntimeError } from '../errors.ts';

/** Where a broker is and how to be sure that it is the one meant. */
export interface BrokerAddress {
  readonly host: string;
  readonly port: number;
  readonly secure: boolean;
  readonly username: string | null;
  readonly password: string | null;
}

/** PEM texts; `authority` null: the system's trust. */
export interface TlsOptions {
  readonly authority?: string | Uint8Array | null;
  readonly certificate?: string | Uint8Array | null;
  readonly key?: string | Uint8Array | null;
}

/**
 * Reads `mqtt://[user:password@]host[:1883]` or `mqtts://…[:8883]`.
 *
 * throws  RuntimeError 'options' naming what is wrong
 */
export function parseBrokerUrl(text: string): BrokerAddress {
  let url: URL;
  try {
    url = new URL(text);
  } catch (cause) {
    throw new RuntimeError(
      'options',
      `broker "${shownBroker(text)}": expected an address such as mqtt://localhost:1883`,
      { cause },
    );
  }
  const secure = url.protocol === 'mqtts:';
  if (!secure && url.protocol !== 'mqtt:')
    throw new RuntimeError(
      'options',
      `broker "${shownBroker(text)}": expected mqtt:// or mqtts://, got ${url.protocol}//`,
    );
  if (url.hostname === '' || (url.pathname !== '' && url.pathname !== '/'))
    throw new RuntimeError(
      'options',
      `broker "${shownBroker(text)}": expected host and port alone, such as mqtt://localhost:1883`,
    );
  return {
    host: url.hostname.replace(/^\[(.*)\]$/, '$1'),
    port: url.port === '' ? (secure ? 8883 : 1883) : Number(url.port),
    secure,
    username: url.username === '' ? null : decoded(url.username),
    password: url.password === '' ? null : decoded(url.password),
  };
}

/** A broker's address as it may be shown: without user and password. */
export function shownBroker(text: string): string {
  return text.replace(/\/\/.*@/, '//');
}

/** A part of an address; never repeated in a refusal, since it may be a password. */
function decoded(part: string): string {
  try {
    return decodeURIComponent(part);
  } catch (cause) {
    throw new RuntimeError('options', 'broker: expected user and password with a "%" written as %25, got another one', {
      cause,
    });
  }
}

/** Opens the stream; it closes itself on a packet of more than `maxPacketBytes`. */
export function openStream(address: BrokerAddress, tls: TlsOptions, maxPacketBytes: number): Socket {
  const { host, port } = address;
  const socket = address.secure
    ? connectTls({
        host,
        port,
        // Only a name may be sent ahead (RFC 6066 section 3), not an address.
        ...(isIP(host) ? {} : { servername: host }),
        ...(tls.authority ? { ca: Buffer.from(tls.authority) } : {}),
        ...(tls.certificate ? { cert: Buffer.from(tls.certificate) } : {}),
        ...(tls.key ? { key: Buffer.from(tls.key) } : {}),
      })
    : connectTcp({ host, port });
  socket.setNoDelay(true);
  const tooLarge = createPacketGuard(maxPacketBytes);
  socket.on('data', (chunk: Buffer) => {
    const announced = tooLarge(chunk);
    if (announced > 0)
      socket.destroy(
        Object.assign(new Error(`incoming packet of ${announced} bytes, at most ${maxPacketBytes} accepted`), {
          code: 'PACKET_TOO_LARGE',
        }),
      );
  });
  return socket;
}

/**
 * Follows the fixed headers of the packets in a byte stream (MQTT 2.2: type, then up to four length bytes of seven bits)
 * and returns the announced size of the first packet above `maxBytes`, or 0.
 */
export function createPacketGuard(maxBytes: number): (chunk: Uint8Array) => number {
  let bodyLeft = 0;
  /** -1: the next byte is a packet's first; otherwise the number of length bytes read so far. */
  let lengthBytes = -1;
  let length = 0;
  return (chunk) => {
    let at = 0;
    while (at < chunk.length) {
      if (bodyLeft > 0) {
        const step = Math.min(bodyLeft, chunk.length - at);
        bodyLeft -= step;
        at += step;
        continue;
      }
      const byte = chunk[at++]!;
      if (lengthBytes < 0) {
        lengthBytes = 0;
        length = 0;
        continue;
      }
      length += (byte & 127) * 128 ** lengthBytes;
      lengthBytes++;
      if ((byte & 128) !== 0 && lengthBytes < 4) continue;
      if (length > maxBytes) return length;
      bodyLeft = length;
      lengthBytes = -1;
    }
    return 0;
  };
}
