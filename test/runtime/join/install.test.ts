/**
 * The page on installing, done as written: its shell blocks run one after the other, then the unit's own command line, in a
 * file tree and a network that only this test sees (unshare(1)). What needs the packages' source or a running systemd is in
 * blocks of no language, or begins with apt-get, and is not run here.
 */
import { execFileSync, spawnSync } from 'node:child_process';
import { existsSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { formatKey, publicHalf } from '@stillwell/protocol';
import { describe, expect, test } from 'vitest';
import { testFolder } from '../../support/folder.ts';
import { author, SITE_TEXT, sealedOf } from '../../support/running-site.ts';

const ROOT = fileURLToPath(new URL('../../..', import.meta.url));
const PAGE = join(ROOT, 'runtime/install.md');
const UNIT = join(ROOT, 'runtime/service/stillwell-gateway.service');
const PATIENCE_MS = 120_000;

/** Why the page cannot be followed here; null where it can. */
function hindrance(): string | null {
  if (process.getuid?.() !== 0) return 'needs root';
  for (const program of ['/usr/sbin/mosquitto', '/usr/sbin/ip', '/usr/sbin/useradd', '/usr/sbin/runuser'])
    if (!existsSync(program)) return `needs ${program}`;
  return spawnSync('unshare', ['-mn', 'true']).status === 0 ? null : 'may not unshare';
}

const hindered = hindrance();

function blocks(): string[] {
  return [...readFileSync(PAGE, 'utf8').matchAll(/^```sh\n([\s\S]*?)^```/gm)].map((match) => match[1]!);
}

/** The command line of the unit, its continuation lines joined. */
function execStart(): string {
  return /^ExecStart=((?:.*\\\n)*.*)$/m.exec(readFileSync(UNIT, 'utf8'))![1]!.replaceAll('\\\n', ' ');
}

/** Shell that makes the tree and the network, follows the page, starts what the unit starts, and asks how it is. */
function script(folder: string): string {
  const page = blocks().map((block) => block.replaceAll(/^apt-get .*\n/gm, ''));
  const status = page.pop()!;
  return `set -eu
export PATH=${JSON.stringify(join(process.execPath, '..'))}:$PATH
mount --make-rprivate /
ip link set lo up
cp -a /etc ${folder}/etc && mount --bind ${folder}/etc /etc
for place in /opt /usr/local/bin /var/lib /run /var/log; do mount -t tmpfs none $place; done
install -d -o mosquitto -g mosquitto /var/lib/mosquitto /var/log/mosquitto /run/mosquitto
cd ${folder}
${page.slice(0, -2).join('\n')}
mosquitto -d -c /etc/mosquitto/mosquitto.conf
sleep 1
${page.at(-2)!}
mkdir -p /etc/systemd/system
${page.at(-1)!}
cmp /etc/systemd/system/stillwell-gateway.service ${UNIT}
install -d -o stillwell -g stillwell -m 750 /var/lib/stillwell-gateway
while IFS='=' read -r name value; do export "$name=$value"; done < /etc/stillwell/gateway.env
export STATE_DIRECTORY=/var/lib/stillwell-gateway
runuser -u stillwell -- ${execStart()} > log 2>&1 &
until grep -q 'connected to the broker' log && [ -e /var/lib/stillwell-gateway/status.json ]; do kill -0 $!; sleep .1; done
sleep 1.5
${status}
pkill -TERM -P $! || kill -TERM $!
wait $! || true
cat log
`;
}

describe('the page on installing', () => {
  test('speaks of the version, the paths and the limits that hold', () => {
    const page = readFileSync(PAGE, 'utf8');
    const unit = readFileSync(UNIT, 'utf8');
    const { version } = JSON.parse(readFileSync(join(ROOT, 'runtime/package.json'), 'utf8'));
    expect(new Set(page.match(/stillwell-gateway-\d+\.\d+\.\d+/g))).toEqual(new Set([`stillwell-gateway-${version}`]));
    const { engines } = JSON.parse(readFileSync(join(ROOT, 'package.json'), 'utf8'));
    expect(page).toContain(`Node ${engines.node.replace('>=', '')} or newer`);
    for (const path of [
      '/etc/stillwell/site.yaml',
      '/etc/stillwell/author.pub',
      '/opt/stillwell/stillwell-gateway.mjs',
    ])
      expect(execStart()).toContain(path);
    expect(unit).toMatch(/^StateDirectory=stillwell-gateway$/m);
    expect(unit).toMatch(/^MemoryHigh=160M\nMemoryMax=256M$/m);
    expect(unit).toMatch(/^WatchdogSec=60$/m);
  });

  test.skipIf(hindered !== null)(
    `leads to a gateway that runs${hindered ? ` (${hindered})` : ''}`,
    {
      timeout: PATIENCE_MS,
    },
    () => {
      const folder = testFolder();
      execFileSync(process.execPath, [join(ROOT, 'runtime/join/build.js'), join(folder, 'joined')]);
      execFileSync('sh', ['-c', `mv joined/*.tgz . && chmod 755 .`], { cwd: folder });
      writeFileSync(join(folder, 'site.yaml'), SITE_TEXT);
      writeFileSync(join(folder, 'author.pub'), formatKey(publicHalf(author)));
      writeFileSync(join(folder, 'first.swb'), sealedOf(1));
      writeFileSync(join(folder, 'follow.sh'), script(folder));
      const words = ['-mnpf', '--kill-child', '--mount-proc', 'bash', join(folder, 'follow.sh')];
      const { status, stdout, stderr } = spawnSync('unshare', words, { encoding: 'utf8', timeout: PATIENCE_MS });
      expect(`${stdout}${stderr}`).toMatch(/every check passed/);
      expect(stdout).toMatch(/^process {3}running, \d+$/m);
      expect(stdout).toMatch(/"level":"info".*"msg":"stopped"/);
      expect({ status, stderr }).toMatchObject({ status: 0 });
    },
  );

  const analyser = '/usr/bin/systemd-analyze';
  test.skipIf(!existsSync(analyser))('states the exposure that systemd counts, and a unit it can read', () => {
    const words = ['security', '--offline=true', '--no-pager', UNIT];
    const { stdout } = spawnSync(analyser, words, { encoding: 'utf8', env: { ...process.env, LC_ALL: 'C.UTF-8' } });
    const said = /Overall exposure level for stillwell-gateway\.service: ([\d.]+)/.exec(stdout)?.[1];
    const stated = /systemd-analyze security stillwell-gateway` says ([\d.]+)/.exec(readFileSync(PAGE, 'utf8'))![1];
    // Newer versions of systemd ask more questions: the stated one is Debian 12's.
    expect(Number(said)).toBeLessThan(Number(stated) + 0.5);
    const { stderr } = spawnSync(analyser, ['verify', UNIT], { encoding: 'utf8' });
    const faults = stderr
      .split('\n')
      .filter((line) => line !== '' && !/RestartSteps|RestartMaxDelaySec|not executable/.test(line));
    expect(faults).toEqual([]);
  });
});
