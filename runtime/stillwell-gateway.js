#!/usr/bin/env -S node --max-semi-space-size=1 --v8-pool-size=1 --expose-gc
// Committed as JavaScript so that npm can link the command before the first build. The flags, with memory.ts, keep a third
// of the memory free that V8 would leave to garbage; `node runtime/stillwell-gateway.js` runs as well, only larger.
import './dist/cli.js';
