/** What every story is given and gives back. */
import type { Verdict } from '../check.ts';
import type { Fleet } from '../fleet.ts';
import type { Narrator } from '../progress.ts';

/** One run of a story. */
export interface StoryContext {
  /** Empty folder of this run. */
  readonly folder: string;
  readonly seed: number;
  /** Days to play; null: the story's own. */
  readonly days: number | null;
  readonly narrator: Narrator;
  /** Told of the fleet as soon as there is one, so that an interruption can end it. */
  readonly onFleet: (fleet: Fleet) => void;
}

/** How a story ended. */
export interface StoryResult {
  /** Tables and remarks for people, above the verdicts. */
  readonly report: string;
  readonly verdicts: readonly Verdict[];
  /** The same as plain numbers, for programs. */
  readonly figures: Readonly<Record<string, unknown>>;
  /** What can be looked at while the fleet is left running. */
  readonly lookAt: readonly string[];
  /** Goes on playing, slowly, until aborted: for a fleet that is left running. */
  readonly linger: (signal: AbortSignal) => Promise<void>;
}

/** A story of the demo. */
export interface Story {
  readonly name: string;
  readonly summary: string;
  /** Runs until Ctrl-C, `--keep` or not. */
  readonly staysOpen?: boolean;
  readonly play: (context: StoryContext) => Promise<StoryResult>;
}
