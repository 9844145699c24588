/**
 * The YAML library, loaded at its first use: its seventy modules would else be a sixth of the start of every command, also
 * of those that read no YAML. It is a CommonJS package, so it loads within a call that is not async.
 */
import { createRequire } from 'node:module';
import type * as Yaml from 'yaml';

const load = createRequire(import.meta.url);

/** The library; the same object at every call. */
export const yamlLibrary = (): typeof Yaml => load('yaml') as typeof Yaml;
