/**
 * What the survey says of resolution.
 */
import type { Signal } from '@stillwell/protocol';
import { latticeIndex, latticeValue } from '@stillwell/protocol';
import { counted, type Finding, figure, percent } from './finding.ts';
import type { ChannelReadings } from './history.ts';
import type { FoundLattice } from './resolution.ts';

function offLattice(values: Float64Array, { step, offset }: FoundLattice): number {
  let off = 0;
  for (const value of values) {
    if (Number.isNaN(value)) continue;
    const near = latticeValue(latticeIndex(value, step, offset), step, offset);
    if (Math.abs(near - value) > step * 1e-6 + Math.abs(value) * 2 ** -23) off++;
  }
  return off;
}

/** One note for all signals that went through 32-bit floats and were printed in full. */
export function singleFindings(signals: readonly Signal[], lattices: readonly FoundLattice[]): Finding[] {
  const names = signals.filter((_, c) => lattices[c]?.how === 'float32 decimals').map(({ name }) => name);
  if (names.length === 0) return [];
  return [
    {
      kind: 'resolution',
      weight: 'note',
      signal: names.length === 1 ? (names[0] as string) : null,
      from: null,
      to: null,
      count: names.length,
      sentence: `${names.join(', ')} went through 32-bit floats and ${names.length === 1 ? 'was' : 'were'} printed with digits never measured; the steps above give every reading back.`,
      advice: 'Nothing to do.',
    },
  ];
}

/** A declared resolution the readings do not keep to, or values without any lattice. */
export function latticeFindings(signal: Signal, channel: ChannelReadings, lattice: FoundLattice): Finding[] {
  const { name } = signal;
  const whole = { kind: 'resolution', signal: name, from: null, to: null } as const;
  const readings = channel.values.length;
  if (lattice.how === 'computed')
    return [
      {
        ...whole,
        weight: 'look',
        count: readings,
        sentence: `${name} has more digits than a sensor gives; it was put on steps of ${figure(lattice.step)}, moving no reading by more than half of that.`,
        advice: 'Declare the resolution in the site file if it is known: coarser steps cost fewer bytes on the wire.',
      },
    ];
  if (lattice.how !== 'declared') return [];
  const off = offLattice(channel.values, lattice);
  if (off === 0) return [];
  return [
    {
      ...whole,
      weight: off > readings / 100 ? 'serious' : 'look',
      count: off,
      sentence: `${name} is declared to move in steps of ${figure(lattice.step)}, but ${counted(off, 'reading')} (${percent(off / readings)}) lie between; they were rounded.`,
      advice: 'Take the resolution out of the site file to have it found, or mend it.',
    },
  ];
}
