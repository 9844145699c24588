export { type Archive, type ArchivedChannel, readArchive } from './desk/archive.ts';
export { Collector } from './desk/collect.ts';
export { Shelf } from './desk/shelf.ts';
export { openStore } from './desk/store/open.ts';
export { loadHistory } from './history/load.ts';
export { designBank, featureCount } from './identify/bank.ts';
export { fitWindowRidge } from './judge/window-ridge.ts';
export { FIT_DEFAULTS, type FitResult, fit } from './pipeline.ts';
export { bundleWork, memoryWork, timeWork, type Work } from './sizing/fit-work.ts';
