/** What run.js starts on each Node: prints the digests of the month for the bundles in the folder it is given. */
import { runKinds } from './bundles.ts';

process.stdout.write(`${JSON.stringify(runKinds(process.argv[2]!))}\n`);
