/** `stillwell keys`: makes the key pair that bundles are sealed with, and says what a key file is. */
import { createKeyPair, formatKey, isKeyPair, keyIdOf, publicHalf } from '@stillwell/protocol';
import { Command, Option } from 'commander';
import { hex } from '../bundle-file.ts';
import { readKey, refuseToReplace } from '../key-file.ts';
import { writeOutputs } from '../output-file.ts';

interface NewOptions {
  readonly kind: 'author' | 'rollout';
  readonly out: string;
  readonly force: boolean;
  readonly json: boolean;
}

/** The command, to be joined to the program. */
export function keysCommand(): Command {
  const make = new Command('new')
    .description('Makes an Ed25519 key pair: the private file for whoever seals, the public one for every gateway.')
    .addOption(new Option('--kind <kind>', 'what it may sign').choices(['author', 'rollout']).default('author'))
    .requiredOption('--out <file>', 'private key file; the public half goes beside it, ending in .pub')
    .option('--force', 'replace files that are there already', false)
    .option('--json', 'say what was made as JSON', false)
    .addHelpText('after', '\nExample:\n  stillwell keys new --kind author --out author.key')
    .action(makeKeys);
  const show = new Command('show')
    .description('Says what a key file holds; never prints the private half.')
    .argument('<file>', 'key file, private or public')
    .option('--json', 'as JSON', false)
    .addHelpText('after', '\nExample:\n  stillwell keys show author.pub')
    .action(showKey);
  return new Command('keys')
    .description('Makes and shows keys.')
    .addCommand(make)
    .addCommand(show)
    .addHelpText('after', '\nExample:\n  stillwell keys new --kind author --out author.key');
}

/** `author.key` gives `author.pub`, any other name gets `.pub` added. */
function publicPath(path: string): string {
  return path.endsWith('.key') ? `${path.slice(0, -4)}.pub` : `${path}.pub`;
}

function makeKeys(options: NewOptions): void {
  const publicFile = publicPath(options.out);
  refuseToReplace(options.out, options.force);
  refuseToReplace(publicFile, options.force);
  const pair = createKeyPair(undefined, options.kind);
  writeOutputs([
    { path: options.out, bytes: formatKey(pair), mode: 0o600 },
    { path: publicFile, bytes: formatKey(publicHalf(pair)) },
  ]);
  const id = hex(keyIdOf(pair.publicKey));
  if (options.json) {
    process.stdout.write(`${JSON.stringify({ kind: options.kind, id, private: options.out, public: publicFile })}\n`);
    return;
  }
  process.stdout.write(
    `${options.kind} key ${id}\n` +
      `  ${options.out}  private: keep it off the gateways and back it up; who has it can seal bundles\n` +
      `  ${publicFile}  public: give it to every gateway (--trust)\n`,
  );
}

function showKey(file: string, options: { readonly json: boolean }): void {
  const key = readKey(file);
  const shown = {
    kind: key.kind,
    id: hex(keyIdOf(key.publicKey)),
    public: hex(key.publicKey),
    holdsPrivateHalf: isKeyPair(key),
  };
  if (options.json) {
    process.stdout.write(`${JSON.stringify(shown)}\n`);
    return;
  }
  process.stdout.write(
    `${file}: ${shown.kind} key ${shown.id}, ${shown.holdsPrivateHalf ? 'private and public half' : 'public half'}\n` +
      `  public  ${shown.public}\n`,
  );
}
