/**
 * Starts a built command again and again in one process, each time as if it were new: its own arguments, folder, output
 * and exit code. Loading a program costs a hundred times what refusing costs, and a test of refusals has many of them.
 * Used by cli.ts alone. Not for commands that keep running.
 */
import { pathToFileURL } from 'node:url';

process.on('message', async ({ number, program, args, folder }) => {
  const said = { stdout: '', stderr: '' };
  const writers = {};
  for (const name of ['stdout', 'stderr']) {
    writers[name] = process[name].write;
    process[name].write = (text) => {
      said[name] += text;
      return true;
    };
  }
  process.chdir(folder);
  process.argv = [process.execPath, program, ...args];
  process.exitCode = undefined;
  try {
    // The module of a program runs anew under every other address; what it imports is loaded once.
    await import(`${pathToFileURL(program).href}?start=${number}`);
  } catch (error) {
    said.stderr += `${error.stack}\n`;
    process.exitCode = 1;
  }
  for (const name of ['stdout', 'stderr']) {
    process[name].write = writers[name];
    // What a program hangs on its output ends with it.
    process[name].removeAllListeners('error');
  }
  process.send({ code: process.exitCode ?? 0, out: said.stdout, err: said.stderr });
  process.exitCode = undefined;
});
