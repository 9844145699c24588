/**
 * Freezes plain data all the way down, so that what was checked stays what it was. Bytes stay writable: the language
 * cannot freeze them.
 */
export const deepFreeze = <T>(value: T): T => {
  if (typeof value !== 'object' || value === null || ArrayBuffer.isView(value) || Object.isFrozen(value)) return value;
  for (const inner of Object.values(value)) deepFreeze(inner);
  return Object.freeze(value);
};
