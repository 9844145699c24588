/**
 * Loads kernels.wasm, which `npm run build` lays beside this file. It ends in a custom section that tells whether it is
 * whole:
 *
 * offset from the end   size   meaning
 * 83                    3      id 0, length, length of the name
 * 80                    16     "stillwell.digest"
 * 64                    32     SHA-256 of what it was built from (build.js)
 * 32                    32     SHA-256 of all bytes before this section
 */
import { createHash } from 'node:crypto';
import { readFileSync } from 'node:fs';
import { fileURLToPath } from 'node:url';
import { TrainError } from '../errors.ts';
import type { Core } from './core.ts';
import { type WasmMemory, type WasmModule, webAssembly } from './web-assembly.ts';

const SECTION = 83;
const FILE = new URL('./kernels.wasm', import.meta.url);

/** A module of one function that adds two lanes of float64: valid only where WebAssembly SIMD is there. */
const PROBE = Uint8Array.from([
  ...[0x00, 0x61, 0x73, 0x6d, 0x01, 0x00, 0x00, 0x00], // magic, version 1
  ...[0x01, 0x06, 0x01, 0x60, 0x01, 0x7b, 0x01, 0x7b], // type: v128 -> v128
  ...[0x03, 0x02, 0x01, 0x00, 0x0a, 0x0b, 0x01, 0x09, 0x00], // one function, one body without locals
  ...[0x20, 0x00, 0x20, 0x00, 0xfd, 0xf0, 0x01, 0x0b], // local.get 0, local.get 0, f64x2.add, end
]);

let compiled: WasmModule | null = null;

/** True where the machine has WebAssembly SIMD. */
export function hasSimd(): boolean {
  return webAssembly?.validate(PROBE) === true;
}

/**
 * The loops in WebAssembly over one memory.
 *
 * shapes  as core.ts has them
 * units   any
 * throws  TrainError 'file' where kernels.wasm is missing or damaged
 * source  this project's assembly/
 * cost    reads and compiles 10 kB once in a process
 */
export function loadCore(memory: WasmMemory): Core {
  compiled ??= openModule(fileURLToPath(FILE));
  return new webAssembly!.Instance(compiled, { env: { memory } }).exports as unknown as Core;
}

/**
 * The module in a file, checked against its own digest.
 *
 * shapes  path of kernels.wasm
 * units   none
 * throws  TrainError 'file' where the file is missing or a byte is not as built
 * source  the layout above
 * cost    one SHA-256 over 10 kB
 */
export function openModule(path: string): WasmModule {
  const bytes = read(path);
  const end = bytes.length - SECTION;
  const digest = createHash('sha256')
    .update(bytes.subarray(0, Math.max(0, end)))
    .digest();
  if (end < 8 || !digest.equals(bytes.subarray(-32))) {
    throw refusal(path, `is damaged: its ${bytes.length} bytes are not those it was built with`);
  }
  try {
    return new webAssembly!.Module(bytes);
  } catch (cause) {
    throw refusal(path, 'is no WebAssembly module', cause);
  }
}

function read(path: string): Uint8Array<ArrayBuffer> {
  try {
    return new Uint8Array(readFileSync(path));
  } catch (cause) {
    throw refusal(path, 'cannot be read', cause);
  }
}

function refusal(path: string, what: string, cause?: unknown): TrainError {
  return new TrainError(
    'file',
    `The compiled kernels ${path}: the file ${what}. Run \`npm run build\` to make it anew.`,
    {
      details: { path },
      cause,
    },
  );
}
