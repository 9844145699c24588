/** What a file of a long history must do to be read side by side with others, stopped, and gone on with. */
import type { Gathering } from './gathering.ts';
import type { FileRead } from './history.ts';

/** Where a stream stands, as plain data; each kind of file adds its own. */
export interface StreamState {
  readonly kind: 'text' | 'columns';
}

/** How a stream begins: where an earlier run stood, or behind a file that came before it, or anew. */
export interface StreamStart {
  readonly state: StreamState | null;
  readonly previous: Gathering | null;
}

/** A file that fills lists a few thousand rows at a time. */
export interface ReadingStream {
  readonly path: string;
  /** The lists; whoever reads takes the rows away between two calls of `more`. */
  readonly gathering: Gathering;
  /** Reads on; false at the end. */
  more(): Promise<boolean>;
  readonly rows: number;
  /** Stored bytes read so far. */
  readonly bytesDone: number;
  /** After the end: how the file was understood. */
  readonly account: FileRead;
  /** Where it stands, its lists apart; null where nothing was read yet. */
  state(): StreamState | null;
  close(): Promise<void>;
}
