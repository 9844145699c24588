/** Lines for whoever looks after the machine: JSON for a log collector, plain on a terminal. */
import { pino } from 'pino';
import { RuntimeError } from './errors.ts';

/** Four levels of lines. */
export interface Log {
  debug(text: string): void;
  info(text: string): void;
  warn(text: string): void;
  error(text: string): void;
}

/** Levels as the command line takes them. */
export const LOG_LEVELS = ['debug', 'info', 'warn', 'error', 'silent'] as const;

/** throws  RuntimeError 'options' on an unknown level */
export function createLog(level: string): Log {
  if (!LOG_LEVELS.some((known) => known === level))
    throw new RuntimeError('options', `--log: expected ${LOG_LEVELS.join(', ')}, got "${level}"`);
  const options = {
    level,
    base: null,
    timestamp: () => `,"time":"${new Date().toISOString()}"`,
    formatters: { level: (label: string) => ({ level: label }) },
  };
  const logger = process.stdout.isTTY ? pino(options, { write: writePlain }) : pino(options);
  return {
    debug: (text) => logger.debug(text),
    info: (text) => logger.info(text),
    warn: (text) => logger.warn(text),
    error: (text) => logger.error(text),
  };
}

/** The same log for one of several: its lines begin with a name. */
export function prefixed(log: Log, name: string): Log {
  return {
    debug: (text) => log.debug(`${name}: ${text}`),
    info: (text) => log.info(`${name}: ${text}`),
    warn: (text) => log.warn(`${name}: ${text}`),
    error: (text) => log.error(`${name}: ${text}`),
  };
}

function writePlain(line: string): void {
  const { time, level, msg } = JSON.parse(line) as { time: string; level: string; msg: string };
  process.stdout.write(`${time.slice(11, 23)} ${level.padEnd(5)} ${msg}\n`);
}
