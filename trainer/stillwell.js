#!/usr/bin/env node
// Committed as JavaScript so that npm can link the command before the first build. The joined program is the compiled one in
// fewer files, sooner loaded; where it is missing, or something was compiled since, the compiled one runs.
import { fileURLToPath } from 'node:url';
import { isCurrent } from './join/current.js';

await import(isCurrent(fileURLToPath(new URL('./joined', import.meta.url))) ? './joined/cli.js' : './dist/cli.js');
