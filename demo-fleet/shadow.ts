/**
 * A bundle run on the side, in this process, by the gateway's own filter: what an old bundle would have forecast had it
 * been left in service.
 */
import type { Bundle } from '@stillwell/protocol';
import {
  createState,
  type FilterState,
  forecastPath,
  type Model,
  modelFromBundle,
  update,
} from '@stillwell/runtime/filter';

/** A filter that follows the readings and forecasts without bounds. */
export class Shadow {
  private readonly model: Model;
  private readonly state: FilterState;
  private readonly median: Float64Array;

  constructor(bundle: Bundle) {
    this.model = modelFromBundle(bundle);
    this.state = createState(this.model);
    this.median = new Float64Array(this.model.signalCount * this.model.horizon);
  }

  /** Folds in one tick's readings (channels in the bundle's order) and gives (signals × 3 × horizon), the bounds void. */
  follow(tick: number, readings: Float64Array): Float64Array {
    const { signalCount, horizon } = this.model;
    update(this.model, this.state, tick, readings);
    forecastPath(this.model, this.state, this.median);
    const path = new Float64Array(signalCount * 3 * horizon).fill(Number.NaN);
    for (let i = 0; i < signalCount; i++)
      path.set(this.median.subarray(i * horizon, (i + 1) * horizon), i * 3 * horizon);
    return path;
  }
}
