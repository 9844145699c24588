/** Our words into the MQTT library's, and its errors into plain ones. Used by connection.ts alone. */
import type { Outgoing, Will } from './types.ts';

interface PublishOptions {
  qos: 0 | 1;
  retain: boolean;
  properties?: {
    messageExpiryInterval?: number;
    contentType?: string;
    responseTopic?: string;
    correlationData?: Buffer;
  };
}

interface WillOptions {
  topic: string;
  payload: Buffer;
  qos: 0 | 1;
  retain: boolean;
  properties?: { willDelayInterval?: number; contentType?: string };
}

/** Words for the system's and the broker's codes. */
export function plainReason(error: Error): string {
  const code = (error as { code?: unknown }).code;
  if (code === 'ECONNREFUSED')
    return 'nothing listens there (connection refused); check address and port, and that the broker runs';
  if (code === 4 || code === 5 || code === 134 || code === 135)
    return 'not let in (not authorised); check user and password';
  if (code === 'ENOTFOUND' || code === 'EAI_AGAIN') return 'host name not found; check the address';
  if (code === 'ETIMEDOUT' || code === 'EHOSTUNREACH' || code === 'ENETUNREACH')
    return 'host not reachable; check address and network';
  if (code === 'ECONNRESET') return 'connection closed by the broker';
  return error.message.replace(/\s*\n[\s\S]*$/, '');
}

/** The same bytes as the library wants them. */
export function asBuffer(payload: Uint8Array | string): Buffer {
  if (typeof payload === 'string') return Buffer.from(payload, 'utf8');
  return Buffer.isBuffer(payload) ? payload : Buffer.from(payload.buffer, payload.byteOffset, payload.byteLength);
}

/** Properties exist on MQTT 5 alone. */
export function publishOptions(message: Outgoing, version: 4 | 5): PublishOptions {
  const { qos, retain, expirySeconds, contentType, responseTopic, correlationData } = message;
  if (version === 4) return { qos, retain };
  return {
    qos,
    retain,
    properties: {
      ...(expirySeconds === undefined ? {} : { messageExpiryInterval: Math.max(1, Math.ceil(expirySeconds)) }),
      ...(contentType === undefined ? {} : { contentType }),
      ...(responseTopic === undefined ? {} : { responseTopic }),
      ...(correlationData === undefined ? {} : { correlationData: asBuffer(correlationData) }),
    },
  };
}

/** The will delay exists on MQTT 5 alone. */
export function willOptions(will: Will, version: 4 | 5): WillOptions {
  const { topic, qos, retain, contentType, delaySeconds = 0 } = will;
  const plain = { topic, payload: asBuffer(will.payload), qos, retain };
  if (version === 4) return plain;
  return { ...plain, properties: { willDelayInterval: delaySeconds, ...(contentType ? { contentType } : {}) } };
}
