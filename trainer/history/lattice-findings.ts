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

/** A declared resolution the readings do not keep to, values without any lattice, or 32-bit floats printed in full. */
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
  if (lattice.how === 'float32 decimals')
    return [
      {
        ...whole,
        weight: 'note',
        count: readings,
        sentence: `${name} went through 32-bit floats and was printed with digits it never had; steps of ${figure(lattice.step)} give every reading back.`,
        advice: 'Nothing to do.',
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
