/** The first time in a file, so that files can be read in the order of their times however they were given. */
import type { Site } from '@stillwell/protocol';
import { ColumnStream } from './column-stream.ts';
import type { ColumnsEngine } from './columns-engine.ts';
import type { FileReader } from './file-reader.ts';
import { readerFor } from './format.ts';
import { Gathering } from './gathering.ts';
import { type InputFile, readBlocks } from './input-file.ts';
import { TimeReader } from './times.ts';

const BLOCK_BYTES = 1 << 16;

/**
 * First time of a file, ms; Infinity where it has no reading of this site.
 *
 * throws  TrainError as reading its first lines does
 */
export async function firstTimeOf(
  file: InputFile,
  site: Site,
  zone: string | null,
  engine: ColumnsEngine,
): Promise<number> {
  const everything = { fromMs: Number.NEGATIVE_INFINITY, untilMs: Number.POSITIVE_INFINITY };
  const gathering = new Gathering(site.signals.length + site.inputs.length, everything);
  const times = new TimeReader(zone);
  if (file.kind === 'Parquet') {
    const stream = new ColumnStream(file, site, gathering, times, engine, { state: null, previous: null });
    while (firstOf(gathering) === Number.POSITIVE_INFINITY && (await stream.more()));
    await stream.close();
    return firstOf(gathering);
  }
  let reader: FileReader | null = null;
  for await (const block of readBlocks(file, () => {}, { blockBytes: BLOCK_BYTES })) {
    reader ??= readerFor(file.path, block, site, gathering, times);
    reader.push(block);
    if (firstOf(gathering) < Number.POSITIVE_INFINITY) break;
  }
  return firstOf(gathering);
}

function firstOf({ blocks }: Gathering): number {
  return Math.min(...blocks.flatMap(({ times }) => (times.length > 0 ? [times.view(0, 1)[0] as number] : [])));
}
