/**
 * Centrifugal pumps in parallel on one rising main: each follows H = H0 - a q², the main asks static head plus friction;
 * the duty is where they meet. Wear takes head off the curve (impeller and neck-ring loss), as common practice has it.
 */
import { GRAVITY, lossCoefficient, type Pipe } from './pipe.ts';

/** Density of water at 10 °C, kg/m³ (CRC Handbook: 999.70, from memory). */
export const WATER_DENSITY = 999.7;
/** Kinematic viscosity of water at 10 °C, m²/s (CRC Handbook: 1.307e-6, from memory). */
export const WATER_VISCOSITY = 1.307e-6;

/** Curve and motor of one pump. */
export interface Pump {
  /** Head at closed valve, m. */
  readonly shutOffHead: number;
  /** a of H = H0 - a q², s²/m⁵. */
  readonly slope: number;
  /** Hydraulic times motor efficiency. */
  readonly efficiency: number;
  /** Line voltage, V, and power factor of the three-phase motor. */
  readonly voltage: number;
  readonly powerFactor: number;
}

/**
 * Flow of the whole group in m³/s with `running` equal pumps against `staticHead` (m); 0 when the head is out of reach.
 * Fixed-point steps on the friction factor: it moves so little with flow that four leave less than 1e-9 of the flow.
 */
export function dutyFlow(pump: Pump, pipe: Pipe, running: number, staticHead: number, wear: number): number {
  const head = pump.shutOffHead * (1 - wear) - staticHead;
  if (running === 0 || head <= 0) return 0;
  let flow = running * Math.sqrt(head / pump.slope);
  for (let i = 0; i < 6; i++) {
    const k = lossCoefficient(pipe, flow, WATER_VISCOSITY);
    flow = Math.sqrt(head / (pump.slope / (running * running) + k));
  }
  return flow;
}

/** Line current in A of one pump delivering `flow` (m³/s) at `head` (m), with the no-load share every motor draws. */
export function motorCurrent(pump: Pump, flow: number, head: number): number {
  const hydraulic = WATER_DENSITY * GRAVITY * flow * head;
  const rated = WATER_DENSITY * GRAVITY * pump.shutOffHead * Math.sqrt(pump.shutOffHead / pump.slope) * 0.4;
  const volts = Math.sqrt(3) * pump.voltage * pump.powerFactor;
  return (hydraulic / pump.efficiency + 0.08 * rated) / volts;
}
