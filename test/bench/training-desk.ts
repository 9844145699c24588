/**
 * A desk's archive of a stretch of the plant, made as a real one comes about: a gateway's filter predicts, the surprise is coded in
 * a segment a day, the desk's collector takes the segments in and decodes them.
 */
import { createHash } from 'node:crypto';
import { readFileSync } from 'node:fs';
import { dirname } from 'node:path';
import { decodeBundle, latticeIndex, latticeValue, readEnvelope, SegmentWriter, topicsOf } from '@stillwell/protocol';
import { createState, type Model, modelFromBundle, predictNext, saveState, update } from '@stillwell/runtime/filter';
import { Collector, openStore, Shelf } from '@stillwell/trainer';
import { SEED } from './training-files.ts';
import { FIRST_TICK, PlantStream, SIGNAL_COUNT } from './training-plant.ts';

const ROOT = 'stillwell';
const SEGMENT_TICKS = 1440;
const SKIPPED_AT_ONCE = 1 << 16;

/**
 * Fills a desk's data folder with `ticks` ticks of the plant from `skip` ticks after its first on, as the bundle's gateway sends them.
 *
 * throws  Error where a segment was not decoded: an archive with holes would time something else
 */
export async function makeArchive(folder: string, bundleFile: string, skip: number, ticks: number): Promise<void> {
  const store = await openStore(folder);
  try {
    const troubles: string[] = [];
    let decoded = 0;
    const collector = new Collector({
      store,
      shelf: new Shelf(store, dirname(bundleFile)),
      root: ROOT,
      publish: () => Promise.resolve(),
      onEvent: (event) => {
        if (event.event === 'chain' && event.kind === 'decoded') decoded++;
        else if (['not-kept', 'failed', 'chain', 'bundle-refused'].includes(event.event))
          troubles.push(JSON.stringify(event));
      },
    });
    await collector.refresh(true);
    let sent = 0;
    for (const { site, bytes } of segmentsOf(bundleFile, skip, ticks)) {
      collector.offer(topicsOf(ROOT, site).segments, bytes);
      await collector.settle();
      sent++;
    }
    if (decoded !== sent) throw new Error(`${decoded} of ${sent} segments decoded: ${troubles.slice(0, 3).join('; ')}`);
  } finally {
    await store.close();
  }
}

function* segmentsOf(bundleFile: string, skip: number, ticks: number): Generator<{ site: string; bytes: Uint8Array }> {
  const { document } = readEnvelope(readFileSync(bundleFile));
  const digest = Uint8Array.from(createHash('sha256').update(document).digest());
  const bundle = decodeBundle(document);
  const model = modelFromBundle(bundle);
  const state = createState(model);
  const plant = plantFrom(skip);
  for (let done = 0, number = 0; done < ticks; done += SEGMENT_TICKS, number++) {
    const firstTick = FIRST_TICK + skip + done;
    const writer = new SegmentWriter({
      site: bundle.site,
      gateway: 'g1',
      stream: new Uint8Array(8).fill(1),
      number,
      bundle: digest,
      firstTick,
      channelCount: model.channelCount,
      signalCount: model.signalCount,
      residualScaleSteps: Float64Array.from(
        { length: model.channelCount },
        (_, c) => (model.residualScale[c]! * model.scale[c]!) / model.latticeStep[c]!,
      ),
      startState: saveState(model, state),
      keyed: number === 0,
    });
    const rows = new Float64Array(Math.min(SEGMENT_TICKS, ticks - done) * SIGNAL_COUNT);
    plant.next(rows);
    foldIn(model, state, writer, rows, firstTick);
    yield { site: bundle.site, bytes: writer.finish(saveState(model, state)) };
  }
}

function foldIn(
  model: Model,
  state: ReturnType<typeof createState>,
  writer: SegmentWriter,
  rows: Float64Array,
  firstTick: number,
): void {
  const [predicted, lattice, seen] = [0, 1, 2].map(() => new Float64Array(SIGNAL_COUNT)) as [
    Float64Array,
    Float64Array,
    Float64Array,
  ];
  for (let at = 0; at < rows.length; at += SIGNAL_COUNT) {
    predictNext(model, state, predicted);
    for (let c = 0; c < SIGNAL_COUNT; c++) {
      const [step, offset] = [model.latticeStep[c]!, model.latticeOffset[c]!];
      predicted[c] = (predicted[c]! - offset) / step;
      lattice[c] = latticeIndex(rows[at + c]!, step, offset);
      seen[c] = latticeValue(lattice[c]!, step, offset);
    }
    writer.push(lattice, predicted);
    update(model, state, firstTick + at / SIGNAL_COUNT, seen);
  }
}

/** The plant as it is `skip` ticks after its first. */
function plantFrom(skip: number): PlantStream {
  const plant = new PlantStream(SEED);
  const passed = new Float64Array(SKIPPED_AT_ONCE * SIGNAL_COUNT);
  for (let left = skip; left > 0; left -= SKIPPED_AT_ONCE) {
    plant.next(passed.subarray(0, Math.min(left, SKIPPED_AT_ONCE) * SIGNAL_COUNT));
  }
  return plant;
}
