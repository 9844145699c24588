/**
 * What the engineer does at the desk, through the real commands: make keys, fit, seal, refit, roll.
 */
import { existsSync, mkdirSync, readFileSync, statSync } from 'node:fs';
import { join } from 'node:path';
import { type Bundle, bundleDigest, decodeBundle, openSealed, parseKey } from '@stillwell/protocol';
import type { Processes } from './processes.ts';

/** A sealed bundle on disk, and what stands in it. */
export interface SealedBundle {
  readonly file: string;
  readonly bytes: number;
  readonly digest: string;
  readonly bundle: Bundle;
}

/** Why the demo seals even where the judge sees no skill: so that the rest can be looked at; the table tells. */
const OVERRIDE = 'demonstration: sealed whatever the judge says, so that the outcome can be seen';

/** One engineer's folder of keys, fits and bundles. */
export class Workshop {
  readonly folder: string;
  private readonly processes: Processes;
  private sequence = 0;

  constructor(folder: string, processes: Processes) {
    this.folder = folder;
    this.processes = processes;
    for (const part of ['', 'fits', 'bundles']) mkdirSync(join(folder, part), { recursive: true });
  }

  /** Public half of the author key, for the gateways. */
  get publicKey(): string {
    return join(this.folder, 'author.pub');
  }

  /** Where sealed bundles lie; the desk reads them there. */
  get bundleFolder(): string {
    return join(this.folder, 'bundles');
  }

  async makeKeys(): Promise<void> {
    if (existsSync(this.publicKey)) return;
    await this.processes.run('stillwell', [
      'keys',
      'new',
      '--kind',
      'author',
      '--out',
      join(this.folder, 'author.key'),
    ]);
  }

  /** Fits a site on its history; gives the candidate file. */
  async fit(name: string, siteFile: string, historyFiles: readonly string[], seed: number): Promise<string> {
    const out = join(this.folder, 'fits', name);
    const history = historyFiles.flatMap((file) => ['--history', file]);
    await this.processes.run('stillwell', [
      'fit',
      '--site',
      siteFile,
      ...history,
      '--seed',
      String(seed),
      '--out',
      out,
    ]);
    return join(out, 'candidate.swc');
  }

  /** Fits again from what the desk collected since `sinceIso`; gives the candidate file. */
  async refit(
    name: string,
    siteFile: string,
    archive: string,
    previous: SealedBundle,
    sinceIso: string,
  ): Promise<string> {
    const out = join(this.folder, 'fits', name);
    await this.processes.run('stillwell', [
      'refit',
      ...['--archive', archive],
      ...['--site', siteFile],
      ...['--previous', previous.file],
      ...['--from', sinceIso],
      ...['--out', out],
    ]);
    return join(out, 'candidate.swc');
  }

  /** Signs a candidate under the next sequence number. */
  async seal(name: string, candidate: string): Promise<SealedBundle> {
    const file = join(this.bundleFolder, `${name}.swb`);
    this.sequence++;
    await this.processes.run('stillwell', [
      'seal',
      ...['--candidate', candidate],
      ...['--key', join(this.folder, 'author.key')],
      ...['--sequence', String(this.sequence)],
      ...['--override', OVERRIDE],
      ...['--out', file],
    ]);
    return this.open(file);
  }

  /** Publishes a sealed bundle and waits until the gateway says that it serves it. */
  async roll(sealed: SealedBundle, brokerUrl: string): Promise<void> {
    await this.processes.run('stillwell', ['roll', '--bundle', sealed.file, '--broker', brokerUrl, '--wait', '30']);
  }

  private open(file: string): SealedBundle {
    const trusted = [parseKey(readFileSync(this.publicKey, 'utf8'), this.publicKey)];
    const opened = openSealed(readFileSync(file), trusted);
    return {
      file,
      bytes: statSync(file).size,
      digest: Buffer.from(bundleDigest(opened.document)).toString('hex'),
      bundle: decodeBundle(opened.document),
    };
  }
}
