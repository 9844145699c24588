/** Runs something that must be refused and gives back the refusal; fails when it is accepted or crashes otherwise. */
import { ProtocolError } from '../../protocol/index.ts';

/** The ProtocolError that `action` throws. */
export const refusalOf = (action: () => unknown): ProtocolError => {
  try {
    action();
  } catch (error) {
    if (error instanceof ProtocolError) return error;
    throw error;
  }
  throw new Error('expected a refusal, got acceptance');
};
