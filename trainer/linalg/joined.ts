/**
 * Arrays laid after one another.
 *
 * shapes  parts of any lengths; result of their sum
 * units   any
 * throws  nothing
 * source  none
 * cost    O(result)
 */
export function joined(parts: readonly Float64Array[]): Float64Array {
  const out = new Float64Array(parts.reduce((sum, part) => sum + part.length, 0));
  let at = 0;
  for (const part of parts) {
    out.set(part, at);
    at += part.length;
  }
  return out;
}
