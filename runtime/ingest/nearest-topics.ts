/** For a signal that is silent: which of the topics heard may be the one that was meant. */
import { nearestName } from '@stillwell/protocol';

const MOST = 3;
/** Half of the levels alike, counted with those that are alike but for a letter or two. */
const LEAST_SCORE = 0.5;
/** A level that is nearly the same counts less than the same one. */
const NEARLY = 0.75;

const scoreOf = (wanted: readonly string[], topic: string): number => {
  const levels = topic.split('/');
  const alike = wanted.map((level) => {
    if (levels.includes(level)) return 1;
    return level !== '+' && level !== '#' && nearestName(level, levels) !== null ? NEARLY : 0;
  });
  // The last level most often names the quantity itself.
  const weights = wanted.map((_, i) => (i === wanted.length - 1 ? 2 : 1));
  const sum = weights.reduce((all, weight, i) => all + weight * alike[i]!, 0);
  return sum / (weights.reduce((all, weight) => all + weight, 0) + Math.abs(levels.length - wanted.length));
};

/** The topics most like a filter, best first, at most three. */
export function nearestTopics(filter: string, heard: Iterable<string>): readonly string[] {
  const wanted = filter.split('/');
  return [...heard]
    .map((topic) => ({ topic, score: scoreOf(wanted, topic) }))
    .filter(({ score }) => score >= LEAST_SCORE)
    .sort((a, b) => b.score - a.score || (a.topic < b.topic ? -1 : 1))
    .slice(0, MOST)
    .map(({ topic }) => topic);
}
