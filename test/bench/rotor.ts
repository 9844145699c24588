/**
 * An invented machine that turns unevenly, seen by eight sensors: its angle runs on at a speed that depends on the angle
 * itself and on a load that comes and goes, and each sensor shows a few harmonics of the angle in its own way. Two hidden
 * numbers, nothing linear about them: what random features are for. Seeded.
 */

/** Sensors. */
export const SENSORS = 8;
const HARMONICS = 4;
const NOISE = 0.1;
/** Radians a tick, its dependence on angle and load, its noise. */
const SPEED = { mean: 0.16, byAngle: 0.55, byLoad: 0.18, noise: 0.01 } as const;
/** Ticks until the load has forgotten where it was. */
const LOAD_MEMORY = 400;

/** Readings (ticks × SENSORS), row-major, each sensor of unit variance but for its noise. */
export function rotor(ticks: number, seed: number): Float32Array {
  const normal = normals(seed);
  const weights = Float64Array.from(
    { length: SENSORS * HARMONICS * 2 },
    (_, k) => normal() / (1 + ((k >> 1) % HARMONICS)),
  );
  const decay = Math.exp(-1 / LOAD_MEMORY);
  const out = new Float32Array(ticks * SENSORS);
  let angle = 0;
  let load = normal();
  for (let t = 0; t < ticks; t++) {
    load = decay * load + Math.sqrt(1 - decay * decay) * normal();
    const speed = SPEED.mean * (1 + SPEED.byAngle * Math.sin(angle) + SPEED.byLoad * load);
    angle = (angle + speed + SPEED.noise * normal()) % (2 * Math.PI);
    for (let sensor = 0; sensor < SENSORS; sensor++) {
      let value = NOISE * normal() + 0.3 * load * Math.cos(angle + sensor);
      for (let h = 0; h < HARMONICS; h++) {
        const at = 2 * (sensor * HARMONICS + h);
        value += weights[at]! * Math.cos((h + 1) * angle) + weights[at + 1]! * Math.sin((h + 1) * angle);
      }
      out[t * SENSORS + sensor] = value;
    }
  }
  return out;
}

/** Standard normal numbers (Box and Muller 1958) of a Lehmer sequence (Park and Miller 1988). */
function normals(seed: number): () => number {
  let state = ((seed * 48271) % 2147483647) + 1;
  const uniform = (): number => {
    state = (state * 48271) % 2147483647;
    return state / 2147483647;
  };
  for (let k = 0; k < 20; k++) uniform();
  return () => Math.sqrt(-2 * Math.log(uniform())) * Math.cos(2 * Math.PI * uniform());
}
