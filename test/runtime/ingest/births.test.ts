/** Births over a restart. */
import { expect, test } from 'vitest';
import { parseSavedNodes } from '../../../protocol/sparkplug/saved.ts';
import { SparkplugSessions } from '../../../protocol/sparkplug/sessions.ts';
import { BirthFile } from '../../../runtime/ingest/births.ts';
import { MemoryDisk } from '../../support/memory-disk.ts';
import { sparkplugBytes, sparkplugTopic } from '../../support/sparkplug.ts';

const HOUR = 3_600_000;
const PATH = 'data/births.json';
const source = { group: 'g', node: 'n', device: 'd' };
const route = { source, channel: 0, metric: 'Level', isGood: null, conversion: null };

function send(sessions: SparkplugSessions, type: 'DBIRTH' | 'DDATA', timestamp: number): string[] {
  const said: string[] = [];
  const metric = { alias: 7, type: 'Double', value: 2, ...(type === 'DBIRTH' ? { name: 'Level' } : {}) };
  sessions.take(sparkplugTopic(`spBv1.0/g/${type}/n/d`), sparkplugBytes({ timestamp, metrics: [metric], seq: 1 }), {
    take: (_, value) => void said.push(String(value)),
    refuse: (_, reason) => void said.push(reason),
  });
  return said;
}

function born(disk: MemoryDisk): void {
  disk.makeFolder();
  const sessions = new SparkplugSessions([route]);
  const file = new BirthFile(disk, 'data', sessions, Number.NEGATIVE_INFINITY);
  send(sessions, 'DBIRTH', 1000);
  file.save();
}

function restarted(disk: MemoryDisk, heardMs: number): SparkplugSessions {
  const sessions = new SparkplugSessions([route]);
  new BirthFile(disk, 'data', sessions, heardMs);
  return sessions;
}

test('aliases hold over a short absence, not over a long one, nor where nothing was heard before', () => {
  const disk = new MemoryDisk();
  born(disk);
  expect(send(restarted(disk, 5000), 'DDATA', 5000 + HOUR)).toEqual(['2']);
  expect(send(restarted(disk, 5000), 'DDATA', 5001 + HOUR)).toEqual(['unborn']);
  expect(send(restarted(disk, Number.NEGATIVE_INFINITY), 'DDATA', 1)).toEqual(['unborn']);
  const sessions = restarted(disk, 5000);
  send(sessions, 'DDATA', 6000);
  expect(send(sessions, 'DDATA', 9 * HOUR)).toEqual(['2']);
});

test('nothing is written where nothing changed', () => {
  const disk = new MemoryDisk();
  born(disk);
  const sessions = new SparkplugSessions([route]);
  const file = new BirthFile(disk, 'data', sessions, 0);
  disk.remove(PATH);
  send(sessions, 'DDATA', 1);
  file.save();
  expect(disk.read(PATH)).toBeNull();
  send(sessions, 'DBIRTH', 2);
  file.save();
  expect(disk.read(PATH)).not.toBeNull();
});

test.each([
  '',
  '{',
  'null',
  '{}',
  '[1]',
  '[{"name":"g/n","birthNumber":1,"members":[[null,{"state":"well","bornMs":null,"metrics":[]}]]}]',
  '[{"name":"g/n","birthNumber":1,"members":[["d",{"state":"alive","bornMs":1,"metrics":[["Level",10,{}]]}]]}]',
  '[{"name":"g/n","birthNumber":1,"members":[["d",{"state":"alive","bornMs":1,"metrics":[["Level","10",7]]}]]}]',
])('a file that holds %j is as none', (text) => {
  expect(parseSavedNodes(text)).toBeNull();
  const disk = new MemoryDisk();
  disk.makeFolder();
  disk.write(PATH, Buffer.from(text));
  expect(send(restarted(disk, 1), 'DDATA', 1)).toEqual(['unborn']);
});
