/** Runs a command of the trainer inside the test, and hears what it says on standard output. */
import type { Command } from 'commander';
import { afterEach, beforeEach, vi } from 'vitest';

/** To be called once at the top of a test file; what it gives runs a command and returns what was said meanwhile. */
export function hearing(): (command: Command, ...args: string[]) => Promise<string> {
  let said = '';
  beforeEach(() => {
    vi.spyOn(process.stdout, 'write').mockImplementation((text) => {
      said += String(text);
      return true;
    });
  });
  afterEach(() => {
    vi.restoreAllMocks();
  });
  return async (command, ...args) => {
    said = '';
    await command.exitOverride().parseAsync(args, { from: 'user' });
    return said;
  };
}
