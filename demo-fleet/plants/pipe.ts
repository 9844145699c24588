/**
 * Friction of water in a full pipe: Darcy and Weisbach's head loss with the friction factor of Swamee and Jain (1976),
 * which solves Colebrook's equation directly and lies within 1 % of it over 5e3 < Re < 1e8, 1e-6 < ε/D < 1e-2.
 * Steady flow only: no water hammer.
 */

/** Standard gravity, m/s² (CGPM 1901). */
export const GRAVITY = 9.80665;

/** A rising main: lengths in metres; `minorLoss` is the sum of fitting coefficients on the velocity head. */
export interface Pipe {
  readonly length: number;
  readonly diameter: number;
  readonly roughness: number;
  readonly minorLoss: number;
}

/** Darcy friction factor; laminar below Re 2300, Swamee and Jain above. */
export function frictionFactor(reynolds: number, relativeRoughness: number): number {
  if (reynolds <= 0) return 0;
  if (reynolds < 2300) return 64 / reynolds;
  const inner = relativeRoughness / 3.7 + 5.74 / reynolds ** 0.9;
  return 0.25 / Math.log10(inner) ** 2;
}

/** Head lost at `flow` (m³/s) in metres of the fluid; `viscosity` kinematic, m²/s. */
export function headLoss(pipe: Pipe, flow: number, viscosity: number): number {
  return lossCoefficient(pipe, flow, viscosity) * flow * flow;
}

/** The k of loss = k Q², itself a slow function of Q through the friction factor. */
export function lossCoefficient(pipe: Pipe, flow: number, viscosity: number): number {
  const area = (Math.PI * pipe.diameter * pipe.diameter) / 4;
  const reynolds = (Math.abs(flow) * pipe.diameter) / (area * viscosity);
  const factor = frictionFactor(reynolds, pipe.roughness / pipe.diameter);
  return ((factor * pipe.length) / pipe.diameter + pipe.minorLoss) / (2 * GRAVITY * area * area);
}
