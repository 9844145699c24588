#!/usr/bin/env -S node --max-semi-space-size=1 --v8-pool-size=1
// Committed as JavaScript so that npm can link the command before the first build. The flags keep a third of the memory
// free that V8 would take for garbage: a gateway makes little of it and has little room.
import './dist/cli.js';
