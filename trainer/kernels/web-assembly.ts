/** The few parts of WebAssembly's JavaScript interface that are used here; the types of Node.js 20 lack them. */

/** A memory of 64 KiB pages. */
export interface WasmMemory {
  readonly buffer: ArrayBuffer;
}

/** A compiled module. */
export type WasmModule = object;

interface WasmInterface {
  validate(bytes: Uint8Array<ArrayBuffer>): boolean;
  readonly Module: new (bytes: Uint8Array<ArrayBuffer>) => WasmModule;
  readonly Memory: new (size: { initial: number; maximum: number }) => WasmMemory;
  readonly Instance: new (
    module: WasmModule,
    imports: { env: { memory: WasmMemory } },
  ) => { readonly exports: Readonly<Record<string, unknown>> };
}

/** What the machine offers; undefined where it has no WebAssembly. */
export const webAssembly = (globalThis as { WebAssembly?: WasmInterface }).WebAssembly;
