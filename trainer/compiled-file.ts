/**
 * Where compiled files lie that are started by their place, not imported. From the sources (tests) they are those of the last
 * build, since Node reads no TypeScript; the joined program has them under the same names (join/build.js).
 */
const BASE = import.meta.url.endsWith('.ts') ? './dist/' : './';

/** The file at `path` of the compiled trainer. */
export function compiledFile(path: string): URL {
  return new URL(BASE + path, import.meta.url);
}
