/** What kernels.wasm offers; the same list as trainer/kernels/core.ts. */
export * from './fourier';
export * from './hadamard';
export * from './products';
export * from './shifts';
export * from './symmetric';
export * from './triangular';
export * from './vectors';
