/** Libraries within a joined program: how the one that is loaded late is followed, and whose licences go along. */
import { readdirSync, readFileSync } from 'node:fs';
import { join } from 'node:path';

/** The YAML library is loaded at its first use by a call that no bundler can follow; here by one that it can, no sooner. */
export const requiredYaml = {
  name: 'required-yaml',
  transform: {
    filter: { id: /protocol\/(dist\/yaml-library\.js|yaml-library\.ts)$/ },
    handler(code) {
      const followed = code.replace("load('yaml')", "require('yaml')");
      if (followed === code) throw new Error('protocol/yaml-library.ts loads its library in a way not known here.');
      return followed;
    },
  },
};

/** Folder of the package that a module is from; null for a module of ours or of the bundler's own. */
export function packageOf(id) {
  return /^.*\/node_modules\/(?:@[^/]+\/)?[^/]+(?=\/)/.exec(id)?.[0] ?? null;
}

/** Folders of the packages that modules are from. */
export function packagesOf(ids) {
  return [...new Set(ids.map(packageOf).filter((folder) => folder !== null))].sort();
}

/** The licences of packages, each under its name and version. */
export function noticesOf(packages) {
  const texts = packages.map((folder) => {
    const { name, version } = JSON.parse(readFileSync(join(folder, 'package.json'), 'utf8'));
    const files = readdirSync(folder).filter((file) => /^(licen[cs]e|notice|copying)/i.test(file));
    if (files.length === 0) throw new Error(`${folder} has no licence to go along with the joined files.`);
    const parts = files.sort().map((file) => readFileSync(join(folder, file), 'utf8').trim());
    return `${name} ${version}\n\n${parts.join('\n\n')}\n`;
  });
  return texts.join(`\n${'-'.repeat(80)}\n\n`);
}
