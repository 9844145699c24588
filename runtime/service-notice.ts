/**
 * What systemd is told of a service of Type=notify (sd_notify(3)): ready, alive, stopping. Node has no datagram sockets of
 * the Unix kind, so systemd's own systemd-notify says it: a process of a few milliseconds at each third of the watchdog's time.
 * Without systemd nothing happens.
 */
import { execFile } from 'node:child_process';
import type { Log } from './log.ts';

/** How a service speaks to what started it. */
export interface ServiceNotice {
  ready(): void;
  stopping(): void;
}

/** The environment decides: NOTIFY_SOCKET and WATCHDOG_USEC as systemd sets them. */
export function openServiceNotice(environment: NodeJS.ProcessEnv, log: Log): ServiceNotice {
  if (!environment.NOTIFY_SOCKET) return { ready: () => {}, stopping: () => {} };
  let isTold = false;
  const say = (...words: string[]): void => {
    execFile('systemd-notify', words, { env: environment, timeout: 10_000 }, (error) => {
      if (error === null || isTold) return;
      isTold = true;
      log.error(`systemd-notify: ${error.message.trim()}; systemd will not hear that this gateway is alive`);
    });
  };
  const periodMs = Number(environment.WATCHDOG_USEC ?? Number.NaN) / 3000;
  let timer: NodeJS.Timeout | null = null;
  return {
    ready: () => {
      say('--ready');
      if (periodMs > 0) timer = setInterval(() => say('WATCHDOG=1'), periodMs).unref();
    },
    stopping: () => {
      if (timer !== null) clearInterval(timer);
      say('STOPPING=1');
    },
  };
}
