/**
 * The second thread of a fit: answers one request after the other, in the order they came. It keeps what is light to load,
 * since it starts while the first file is being opened; what is needed to judge is loaded when that is asked for.
 */
import { parentPort } from 'node:worker_threads';
import { TrainError } from '../errors.ts';
import { FactorsKeeper } from '../factors/keeper.ts';
import type { Answered, Asked, Problem, Requests } from './requests.ts';

type Got<What extends keyof Requests> = Requests[What]['got'];
type Answers = {
  readonly [What in keyof Requests]: (given: Requests[What]['given']) => Got<What> | Promise<Got<What>>;
};

let keeper: FactorsKeeper | null = null;

const ANSWERS: Answers = {
  begin: ({ site, halfLifeTicks, start }) => {
    keeper = new FactorsKeeper(site, halfLifeTicks, start);
    return null;
  },
  take: (older) => {
    begun().sink().take(older);
    return null;
  },
  snapshot: () => begun().snapshot(),
  restore: (bytes) => {
    begun().restore(bytes);
    return null;
  },
  earlier: () => begun().earlierBytes(),
  close: (window) => begun().close(window),
  judging: async () => {
    await judging();
    return null;
  },
  bounds: async (given) => (await judging()).bounded(given),
  crossings: async () => (await judging()).crossed(),
  check: async (given) => (await judging()).checked(given),
  cast: async (given) => (await judging()).cast(given),
  end: () => null,
};

function judging(): Promise<typeof import('./judging.ts')> {
  return import('./judging.ts');
}

function begun(): FactorsKeeper {
  if (keeper === null) throw new Error('The second thread was asked for factors before they were begun.');
  return keeper;
}

async function answer({ id, what, given }: Asked): Promise<Answered> {
  try {
    return { id, got: await (ANSWERS[what] as (given: unknown) => unknown)(given) };
  } catch (error) {
    return { id, problem: problemOf(error as Error) };
  }
}

function problemOf(error: Error): Problem {
  const { name, message, stack } = error;
  const isOurs = error instanceof TrainError;
  return { name, message, stack, code: isOurs ? error.code : null, details: isOurs ? plain(error.details) : {} };
}

/** Details that can travel. */
function plain(details: Readonly<Record<string, unknown>>): Readonly<Record<string, unknown>> {
  return JSON.parse(JSON.stringify(details)) as Record<string, unknown>;
}

/** Ends when all asked so far is answered. */
let turn = Promise.resolve();

parentPort?.on('message', (asked: Asked) => {
  turn = turn.then(async () => {
    parentPort?.postMessage(await answer(asked));
    // The thread ends by itself, since the main one is busy and would hold its memory for long.
    if (asked.what === 'end') parentPort?.close();
  });
});
