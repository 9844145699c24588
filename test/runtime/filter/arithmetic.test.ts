/** The rule of the folder: + − × ÷ √ and rounding alone, since the language leaves the last bits of the rest open. */
import { readdirSync, readFileSync } from 'node:fs';
import { fileURLToPath } from 'node:url';
import { expect, test } from 'vitest';

const folder = fileURLToPath(new URL('../../../runtime/filter/', import.meta.url));
const ALLOWED = new Set(['sqrt', 'round', 'floor', 'ceil', 'abs', 'min', 'max', 'fround', 'imul', 'trunc', 'sign']);

/** What a source uses that may differ between machines; comments and strings do not count. */
const forbiddenIn = (text: string): string[] => {
  const code = text.replace(/\/\*[\s\S]*?\*\/|\/\/.*|'(?:[^'\\\n]|\\.)*'/g, ' ');
  const calls = [...code.matchAll(/\bMath\s*\.\s*(\w+)/g)]
    .map((match) => match[1])
    .filter((name) => !ALLOWED.has(name));
  const others = [...code.matchAll(/\*\*|\bMath\s*\[|\bDate\b|\bIntl\b|\blocale\w*|\bperformance\b/g)];
  return [...calls, ...others.map((match) => match[0])];
};

test.each(readdirSync(folder).filter((file) => file.endsWith('.ts')))('%s', (file) => {
  expect(forbiddenIn(readFileSync(folder + file, 'utf8'))).toEqual([]);
});

test('the check sees what it forbids', () => {
  for (const name of ['exp', 'sin', 'cos', 'tan', 'pow', 'log', 'tanh', 'hypot', 'cbrt', 'random', 'log2', 'expm1']) {
    expect(forbiddenIn(`const a = Math.${name}(1);`)).toEqual([name]);
  }
  expect(forbiddenIn('a ** 2; a **= 2;')).toEqual(['**', '**']);
  expect(forbiddenIn("/** Math.exp */ const a = Math.sqrt(2); // Math.sin\n'Math.cos';")).toEqual([]);
});
