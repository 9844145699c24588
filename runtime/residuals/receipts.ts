/** The desk's receipts as they come in: what they name is safe, and may go from the spool. */
import { parseReceiptMessage, toHex } from '@stillwell/protocol';
import type { Log } from '../log.ts';
import type { Shipper } from './ship.ts';

/** Takes one message of the receipts topic; one for another gateway passes without a trace. Never throws. */
export function takeReceipt(payload: Uint8Array, gateway: string, shipper: Shipper, log: Log): void {
  let receipt: ReturnType<typeof parseReceiptMessage>;
  try {
    receipt = parseReceiptMessage(payload);
  } catch (error) {
    log.warn(`receipt not readable: ${(error as Error).message}`);
    return;
  }
  if (receipt.gateway !== gateway) return;
  const stream = toHex(receipt.stream);
  for (const { number, hash } of receipt.segments)
    if (shipper.receipt(stream, number, hash) === 'conflict')
      log.error(`segment ${number}: the desk holds other bytes under this number; it is kept aside here`);
  shipper.poke();
}
