export type * from './bundle.ts';
export * from './errors.ts';
export * from './segment/index.ts';
export type * from './site.ts';
export type * from './tensor.ts';
export * from './version.ts';
