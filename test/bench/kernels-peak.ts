/**
 * The peak of one core as WebAssembly reaches it: twelve chains of two float64 lanes, each a multiplication and an addition a
 * turn, all in registers. The module is written here byte by byte, so that no compiler has a say in it.
 */

const CHAINS = 12;
/** Two lanes, a multiplication and an addition each. */
const OPERATIONS = CHAINS * 4;
const [I32, F64, V128] = [0x7f, 0x7c, 0x7b];
const [C, D] = [3 + CHAINS, 4 + CHAINS];

const get = (local: number): number[] => [0x20, local];
const set = (local: number): number[] => [0x21, local];
const SPLAT = [0xfd, 0x14];
const ADD = [0xfd, 0xf0, 0x01];
const MULTIPLY = [0xfd, 0xf2, 0x01];

const section = (id: number, bytes: readonly number[]): number[] => [id, ...length(bytes.length), ...bytes];
const length = (n: number): number[] => (n < 128 ? [n] : [(n & 127) | 128, n >> 7]);

/** (turns, c, d): every chain is x = x c + d. */
function moduleBytes(): Uint8Array<ArrayBuffer> {
  const chains = Array.from({ length: CHAINS }, (_, k) => 3 + k);
  const body = [
    ...[1, CHAINS + 2, V128],
    ...[...get(1), ...SPLAT, ...set(C), ...get(2), ...SPLAT, ...set(D)],
    ...chains.flatMap((x) => [...get(x % 2 === 0 ? C : D), ...set(x)]),
    ...[0x03, 0x40],
    ...chains.flatMap((x) => [...get(x), ...get(C), ...MULTIPLY, ...get(D), ...ADD, ...set(x)]),
    ...[...get(0), 0x41, 1, 0x6b, 0x22, 0, 0x0d, 0, 0x0b],
    ...[...get(chains[0]!), ...chains.slice(1).flatMap((x) => [...get(x), ...ADD])],
    ...[0xfd, 0x21, 0, 0x0b],
  ];
  return Uint8Array.from([
    ...[0x00, 0x61, 0x73, 0x6d, 1, 0, 0, 0],
    ...section(1, [1, 0x60, 3, I32, F64, F64, 1, F64]),
    ...section(3, [1, 0]),
    ...section(7, [1, 4, ...Buffer.from('peak'), 0, 0]),
    ...section(10, [1, ...length(body.length), ...body]),
  ]);
}

interface Wasm {
  readonly Module: new (bytes: Uint8Array<ArrayBuffer>) => object;
  readonly Instance: new (
    module: object,
  ) => { readonly exports: { readonly peak: (turns: number, c: number, d: number) => number } };
}

/** A loop to time, and the operations one run of it makes. */
export function peakLoop(): { readonly run: () => void; readonly operations: number } {
  const { Module, Instance } = (globalThis as unknown as { WebAssembly: Wasm }).WebAssembly;
  const { peak } = new Instance(new Module(moduleBytes())).exports;
  const turns = 20_000;
  return {
    operations: turns * OPERATIONS,
    run: () => {
      if (!(peak(turns, 0.5, 0.5) > 0)) throw new Error('The peak loop gave no number.');
    },
  };
}
