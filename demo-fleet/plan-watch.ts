/**
 * What a site's forecasts say of the plan they were made under, stretch by stretch: how many used one, how many found it
 * off by more than is usual without one, and how many said so by their quality letter.
 */
import type { ForecastMessage } from '@stillwell/protocol';

/** Counts of one stretch. */
export interface PlanCounts {
  forecasts: number;
  /** Made under a plan. */
  planned: number;
  /** Whose plan was off by more than is usual without one. */
  off: number;
  /** That carry the letter S and name the input. */
  told: number;
  /** Largest plan_error seen, in the input's unit. */
  worst: number;
  /** What is usual without a plan, as last said. */
  usual: number | null;
}

/** Watches one input of one site. */
export class PlanWatch {
  private readonly input: string;
  private readonly stretches = new Map<string, PlanCounts>();

  constructor(input: string) {
    this.input = input;
  }

  /** Takes in one forecast of the signal watched. */
  hear(message: ForecastMessage, label: string): void {
    const counts = this.of(label);
    counts.forecasts++;
    const outlook = message.inputs_ahead?.find(({ input }) => input === this.input);
    if (outlook === undefined) return;
    const { use, plan_error: error, usual_error: usual } = outlook;
    if (use === 'planned') counts.planned++;
    counts.usual = usual;
    if (error !== null) counts.worst = Math.max(counts.worst, error);
    if (error !== null && usual !== null && error > usual) counts.off++;
    const reason = message.quality_reason ?? '';
    if (message.quality === 'S' && reason.includes(`${this.input}: `) && reason.includes('plan')) counts.told++;
  }

  /** Counts of a stretch, all nought where nothing was heard in it. */
  of(label: string): PlanCounts {
    let counts = this.stretches.get(label);
    if (counts === undefined) {
      counts = { forecasts: 0, planned: 0, off: 0, told: 0, worst: 0, usual: null };
      this.stretches.set(label, counts);
    }
    return counts;
  }
}
