/** Births as a file keeps them: read with suspicion, since a disk may give back anything. */
import type { MemberState, SavedMember } from './member.ts';
import type { Alias } from './metric.ts';
import type { SavedNode } from './sessions.ts';

const STATES: readonly unknown[] = ['unheard', 'alive', 'gone'] satisfies MemberState[];

const isAlias = (value: unknown): value is Alias | null =>
  value === null || Number.isSafeInteger(value) || (typeof value === 'string' && /^\d{1,10}:\d{1,10}$/.test(value));

const isMetric = (value: unknown): value is SavedMember['metrics'][number] =>
  Array.isArray(value) && typeof value[0] === 'string' && Number.isSafeInteger(value[1]) && isAlias(value[2]);

const isMember = (value: unknown): value is SavedNode['members'][number] => {
  if (!Array.isArray(value) || !(value[0] === null || typeof value[0] === 'string')) return false;
  const { state, bornMs, metrics } = (value[1] ?? {}) as Partial<SavedMember>;
  const isTimed = bornMs === null || Number.isFinite(bornMs);
  return STATES.includes(state) && isTimed && Array.isArray(metrics) && metrics.every(isMetric);
};

const isNode = (value: unknown): value is SavedNode => {
  const { name, birthNumber, members } = (value ?? {}) as Partial<SavedNode>;
  return (
    typeof name === 'string' && Number.isSafeInteger(birthNumber) && Array.isArray(members) && members.every(isMember)
  );
};

/** Births out of a file's text; null where it holds something else. */
export const parseSavedNodes = (text: string): readonly SavedNode[] | null => {
  try {
    const value: unknown = JSON.parse(text);
    return Array.isArray(value) && value.every(isNode) ? value : null;
  } catch {
    return null;
  }
};
