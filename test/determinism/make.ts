/** Makes the bundles anew, into the folder it is given: for a new kind or format, by `node test/determinism/run.js --make`. */
import { writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { encodeBundle, sealBundle } from '@stillwell/protocol';
import { bundleOfKind, type KindName } from '../support/every-kind.ts';
import { author } from '../support/running-site.ts';
import { KINDS, type Kind } from './bundles.ts';

const FULL: Readonly<Record<Kind, KindName>> = {
  linear: 'linear with all it may have',
  dense: 'dense',
  featured: 'featured',
  switched: 'switched',
  driven: 'driven',
};

for (const kind of KINDS) {
  const sealed = sealBundle(encodeBundle(bundleOfKind(FULL[kind])), { epoch: 1, sequence: 1 }, [author]);
  writeFileSync(join(process.argv[2]!, `${kind}.swb`), sealed);
}
