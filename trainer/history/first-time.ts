/** The first time in a file, so that files can be read in the order of their times however they were given. */
import type { Site } from '@stillwell/protocol';
import type { FileReader } from './file-reader.ts';
import { readerFor } from './format.ts';
import { Gathering } from './gathering.ts';
import { type InputFile, readBlocks } from './input-file.ts';
import { TimeReader } from './times.ts';

const BLOCK_BYTES = 1 << 16;

/**
 * First time of a text file, ms; Infinity where it has no reading of this site.
 *
 * throws  TrainError as reading its first lines does
 */
export async function firstTimeOf(file: InputFile, site: Site, zone: string | null): Promise<number> {
  const everything = { fromMs: Number.NEGATIVE_INFINITY, untilMs: Number.POSITIVE_INFINITY };
  const gathering = new Gathering(site.signals.length + site.inputs.length, everything);
  const times = new TimeReader(zone);
  let reader: FileReader | null = null;
  for await (const block of readBlocks(file, () => {}, { blockBytes: BLOCK_BYTES })) {
    reader ??= readerFor(file.path, block, site, gathering, times);
    reader.push(block);
    const heads = gathering.blocks.flatMap(({ times: list }) => (list.length > 0 ? [list.view()[0] as number] : []));
    if (heads.length > 0) return Math.min(...heads);
  }
  return Number.POSITIVE_INFINITY;
}
