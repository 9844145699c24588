/** Rules on the sources themselves: every export has a docstring, no file outgrows one sitting, no room without a name. */
import { readdirSync, readFileSync } from 'node:fs';
import { join, relative } from 'node:path';
import { fileURLToPath } from 'node:url';
import { describe, expect, test } from 'vitest';

const root = fileURLToPath(new URL('../..', import.meta.url));
const rooms = ['protocol', 'runtime', 'trainer', 'demo-fleet'];

const sources = rooms.flatMap((room) =>
  readdirSync(join(root, room), { recursive: true, encoding: 'utf8' })
    .filter((file) => file.endsWith('.ts') && !/(^|\/)(dist|node_modules)\//.test(file))
    .map((file) => join(room, file)),
);

/** Names of exported declarations that no block comment ends right above. */
function undocumented(text: string): string[] {
  const lines = text.split('\n');
  return lines.flatMap((line, index) => {
    const match = /^export (?:abstract |async )?(?:function\*?|class|const|interface|type|let) (\w+)/.exec(line);
    if (!match) return [];
    const above = lines[index - 1] ?? '';
    // Overloads share the docstring of the first; a decorated type alias list has its own.
    const overload = new RegExp(`^export function ${match[1]}\\b.*;$`).test(above);
    return above.trimEnd().endsWith('*/') || overload ? [] : [match[1]];
  });
}

describe('sources', () => {
  test('the check itself sees a missing docstring', () => {
    expect(undocumented('export const bare = 1;')).toEqual(['bare']);
    expect(undocumented('/** Said. */\nexport function told(): void {}')).toEqual([]);
  });

  test.each(sources)('%s documents every export', (file) => {
    expect(undocumented(readFileSync(join(root, file), 'utf8'))).toEqual([]);
  });

  test.each(sources)('%s can be read in one sitting', (file) => {
    expect(readFileSync(join(root, file), 'utf8').split('\n').length - 1).toBeLessThanOrEqual(400);
  });

  test('no file or folder is named for having no subject', () => {
    const vague = sources.filter((file) => /(^|\/)(utils?|common|helpers?|misc)(\.ts|\/)/.test(relative('.', file)));
    expect(vague).toEqual([]);
  });
});
