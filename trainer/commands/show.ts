/** `stillwell show`: what a bundle, candidate or segment holds, and whether it can be believed. */
import { keyIdOf, openSealed, publicHalf } from '@stillwell/protocol';
import { Command } from 'commander';
import { hex, openBundleFile, probeDifference } from '../bundle-file.ts';
import { bundleFacts, bundleText } from '../describe-bundle.ts';
import { SEGMENT_MAGIC, segmentFacts, segmentText } from '../describe-segment.ts';
import { TrainError } from '../errors.ts';
import { readBytesFile, readKey } from '../key-file.ts';

/** Exit code where all could be shown, and the file is damaged nevertheless. */
const PROBE_FAILED = 1;

interface ShowOptions {
  readonly key?: string;
  readonly json: boolean;
}

/** The command, to be joined to the program. */
export function showCommand(): Command {
  return new Command('show')
    .description('Shows a sealed bundle (.swb), a candidate (.swc) or a segment, and what of it was verified.')
    .argument('<file>', 'bundle, candidate or segment')
    .option('--key <author.pub>', 'verify the signature with this key; exit code 2 if it does not hold')
    .option('--json', 'as JSON', false)
    .addHelpText(
      'after',
      '\nEnds with exit code 1 where the probe does not hold: the file is damaged, and no gateway takes it.\n' +
        '\nExample:\n  stillwell show pump-7.swb --key author.pub',
    )
    .action(show);
}

function show(file: string, options: ShowOptions): void {
  const content = readBytesFile(file, 'a bundle (.swb), a candidate (.swc) or a segment');
  if (Buffer.from(content.subarray(0, 4)).toString('latin1') === SEGMENT_MAGIC) {
    const facts = segmentFactsOf(file, content);
    print(options.json, { what: 'segment', file, ...facts }, segmentText(facts));
    return;
  }
  const opened = openBundleFile(file);
  const { envelope } = opened;
  if (options.key !== undefined && envelope === null) {
    throw new TrainError(
      'keys',
      `${file} is a candidate: it carries no signature to verify with ${options.key}; seal it first`,
    );
  }
  const signature = envelope === null ? 'none' : verify(content, options.key, file);
  const probe = probeDifference(opened);
  const seal =
    envelope === null
      ? null
      : {
          epoch: envelope.epoch,
          sequence: envelope.sequence,
          keys: envelope.signatures.map((one) => hex(one.keyId)),
          bytes: content.length,
          signature,
        };
  const facts = bundleFacts(opened);
  const lines = [sealText(seal, options.key), probeText(probe), '', bundleText(facts)];
  print(
    options.json,
    { what: seal ? 'bundle' : 'candidate', file, seal, probe: probe ?? 'holds', ...facts },
    lines.join('\n'),
  );
  if (probe !== null) process.exitCode = PROBE_FAILED;
}

function segmentFactsOf(file: string, content: Uint8Array): ReturnType<typeof segmentFacts> {
  try {
    return segmentFacts(content);
  } catch (cause) {
    throw new TrainError('file', `${file}: ${(cause as Error).message}; get it again from the gateway or the archive`, {
      cause,
    });
  }
}

/** @returns 'holds', or 'not verified' without a key to verify with. */
function verify(content: Uint8Array, keyFile: string | undefined, file: string): 'holds' | 'not verified' {
  if (keyFile === undefined) return 'not verified';
  const key = publicHalf(readKey(keyFile));
  try {
    openSealed(content, [key]);
  } catch (cause) {
    throw new TrainError(
      'keys',
      `${file}: ${(cause as Error).message}; ${keyFile} is key ${hex(keyIdOf(key.publicKey))}`,
      { cause },
    );
  }
  return 'holds';
}

function sealText(
  seal: { epoch: number; sequence: number; keys: string[]; bytes: number; signature: string } | null,
  key?: string,
): string {
  if (seal === null) return 'Candidate: not sealed';
  const word =
    seal.signature === 'holds' ? `signature holds (${key})` : 'signature not verified (give --key author.pub to do so)';
  return (
    `Sealed: sequence ${seal.sequence} of key epoch ${seal.epoch}, signed by ${seal.keys.join(', ')}, ${seal.bytes} bytes\n` +
    `Verified: layout, digest, format, shapes, stability; ${word}`
  );
}

function probeText(difference: string | null): string {
  return difference === null
    ? 'Probe: replayed here, every bit as stated'
    : `Probe: DOES NOT HOLD: ${difference}; the file is damaged, get it again or fit again`;
}

function print(isJson: boolean, facts: unknown, text: string): void {
  process.stdout.write(`${isJson ? JSON.stringify(facts) : text}\n`);
}
