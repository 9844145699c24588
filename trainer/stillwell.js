#!/usr/bin/env node
// Committed as JavaScript so that npm can link the command before the first build.
import './dist/cli.js';
