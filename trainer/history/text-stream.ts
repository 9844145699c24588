/**
 * One text file of a long history as a stream: block by block into lists of its own, which are taken away as they fill, so
 * that memory does not grow with the file.
 */
import type { Site } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import type { FileReader, ReaderState } from './file-reader.ts';
import { type Format, findFormat, readerFor, readerOf } from './format.ts';
import { Gathering, type Span } from './gathering.ts';
import type { FileRead } from './history.ts';
import { type InputFile, readBlocks } from './input-file.ts';
import type { ReadingStream, StreamStart, StreamState } from './reading-stream.ts';
import type { TimeReader, TimeState } from './times.ts';

/** Stored bytes read at once: a few thousand rows. */
const BLOCK_BYTES = 1 << 18;

/** Where a text file's stream stands. */
interface TextState extends StreamState {
  readonly kind: 'text';
  /** Bytes of text made use of. */
  readonly byte: number;
  readonly format: Format;
  readonly reader: ReaderState;
  readonly times: TimeState;
  readonly previousRowMs: number | null;
  readonly previousMs: readonly (number | null)[];
}

/** Streams one text file. */
export class TextStream implements ReadingStream {
  readonly path: string;
  readonly gathering: Gathering;
  readonly #file: InputFile;
  readonly #site: Site;
  readonly #times: TimeReader;
  readonly #blocks: AsyncGenerator<Buffer, { readonly sha256: string }>;
  #reader: FileReader | null = null;
  #format: Format | null = null;
  #byte = 0;
  #account: FileRead | null = null;
  bytesDone = 0;

  constructor(file: InputFile, site: Site, span: Span, times: TimeReader, from: StreamStart, blockBytes = BLOCK_BYTES) {
    const channels = site.signals.length + site.inputs.length;
    this.path = file.path;
    this.gathering = new Gathering(channels, span, true);
    this.#file = file;
    this.#site = site;
    this.#times = times;
    const state = from.state as TextState | null;
    if (state !== null) this.#restore(state);
    else from.previous?.carryTo(this.gathering);
    this.#blocks = readBlocks(file, (done) => (this.bytesDone = done), {
      blockBytes,
      fromByte: this.#byte,
    });
  }

  get rows(): number {
    return this.#reader?.rows ?? 0;
  }

  async more(): Promise<boolean> {
    if (this.#account !== null) return false;
    const next = await this.#blocks.next();
    if (next.done) {
      this.#end(next.value.sha256);
      return false;
    }
    if (this.#reader === null) {
      this.#format = findFormat(this.path, next.value);
      this.#reader = readerFor(this.path, next.value, this.#site, this.gathering, this.#times);
    }
    this.#byte += next.value.length;
    this.#reader.push(next.value);
    return true;
  }

  get account(): FileRead {
    return this.#account as FileRead;
  }

  async close(): Promise<void> {
    await this.#blocks.return({ sha256: '' });
  }

  state(): StreamState | null {
    if (this.#reader === null || this.#format === null) return null;
    const reader = this.#reader.state();
    const orNull = (value: number): number | null => (Number.isFinite(value) ? value : null);
    const state: TextState = {
      kind: 'text',
      byte: this.#byte - reader.rest,
      format: this.#format,
      reader,
      times: this.#times.state(),
      previousRowMs: orNull(this.gathering.previousRowMs),
      previousMs: Array.from(this.gathering.previousMs, orNull),
    };
    return state;
  }

  #restore(state: TextState): void {
    this.#byte = state.byte;
    this.#format = state.format;
    this.#times.restore(state.times);
    this.gathering.previousRowMs = state.previousRowMs ?? Number.NEGATIVE_INFINITY;
    state.previousMs.forEach((ms, c) => {
      this.gathering.previousMs[c] = ms ?? Number.NEGATIVE_INFINITY;
    });
    this.#reader = readerOf(state.format, this.path, this.#site, this.gathering, this.#times);
    this.#reader.restore(state.reader);
  }

  #end(sha256: string): void {
    if (this.#reader === null)
      throw new TrainError(
        'file',
        `${this.path}: expected a header line and readings, got blank bytes; export it again`,
      );
    const { path, bytes } = this.#file;
    this.#account = { file: path, bytes, sha256, ...this.#reader.end(), timeKind: this.#times.kind };
  }
}
