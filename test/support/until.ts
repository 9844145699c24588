/**
 * Waits until a claim holds; fails with what was waited for. A claim that throws (a message not there yet) does not hold
 * yet; what it threw last is told at the end.
 */
export async function until(what: string, claim: () => boolean, timeoutMs = 8000): Promise<void> {
  const end = Date.now() + timeoutMs;
  let thrown = '';
  for (;;) {
    try {
      if (claim()) return;
      thrown = '';
    } catch (error) {
      thrown = ` (${(error as Error).message})`;
    }
    if (Date.now() > end) throw new Error(`not within ${timeoutMs} ms: ${what}${thrown}`);
    await new Promise((resolve) => setTimeout(resolve, 10));
  }
}
