/**
 * An invented thermal camera before an invented bearing: 320 × 240 pixels at 25 frames a second, in °C. A warm housing on a
 * cooler wall; on it a hot spot that wanders by and by, as the load does, and pulses with the shaft, whose speed is never
 * quite the same; the fan's stripes over all; a room that warms and cools; and the sensor's own noise. Seeded and cheap: a
 * frame costs some four operations a pixel, so that generating is no part of what is measured.
 */

/** Pixels of a row, rows, frames a second. */
export const CAMERA = { width: 320, height: 240, framesPerSecond: 25, tickMs: 40 } as const;
/** Numbers of a frame. */
export const PIXELS = CAMERA.width * CAMERA.height;

/** What the scene is like at a frame, which nobody sees. */
export interface Scene {
  readonly room: number;
  readonly fan: number;
  readonly spotX: number;
  readonly spotY: number;
  readonly spotHeat: number;
}

/** A camera that is running. */
export interface ThermalCamera {
  /** Writes the next frame (PIXELS). */
  next(out: Float32Array): void;
  /** The scene of that frame. */
  readonly scene: Scene;
}

const { width: WIDTH, height: HEIGHT, framesPerSecond: RATE } = CAMERA;
const NOISE_NUMBERS = 1 << 20;
/** °C: a usual noise-equivalent temperature difference of uncooled sensors, 50 mK (common practice). */
const NOISE = 0.05;
const SPOT_RADIUS = 9;
const SPOT_MEAN = 6;
/** Hertz: the shaft's pulse, the fan's stripes. */
const SHAFT = 0.8;
const FAN = 3.1;
/** Seconds until pulse, stripes, spot and room have forgotten where they were. */
const MEMORY = { shaft: 12, fan: 20, spot: 25, room: 400 } as const;
/** Spread of the spot's place, pixels. */
const WANDER = 26;

/** A camera by its seed. */
export function thermalCamera(seed: number): ThermalCamera {
  const uniform = uniforms(seed);
  const normal = (): number => Math.sqrt(-2 * Math.log(1 - uniform())) * Math.cos(2 * Math.PI * uniform());
  const noise = Float32Array.from({ length: NOISE_NUMBERS }, () => NOISE * normal());
  const { base, stripes } = stillScene();
  const shaft = oscillator(SHAFT, MEMORY.shaft, normal);
  const fan = oscillator(FAN, MEMORY.fan, normal);
  const [x, y, room] = [wanderer(MEMORY.spot, normal), wanderer(MEMORY.spot, normal), wanderer(MEMORY.room, normal)];
  const camera = {
    scene: { room: 0, fan: 0, spotX: 0, spotY: 0, spotHeat: 0 },
    next(out: Float32Array): void {
      const scene = {
        room: 0.8 * room(),
        fan: 0.25 * fan(),
        spotX: WIDTH / 2 + WANDER * x(),
        spotY: HEIGHT / 2 + WANDER * y(),
        spotHeat: Math.max(0, SPOT_MEAN + 2 * shaft()),
      };
      camera.scene = scene;
      for (let row = 0; row < HEIGHT; row++) {
        const at = row * WIDTH;
        const from = Math.floor(uniform() * (NOISE_NUMBERS - WIDTH));
        for (let k = 0; k < WIDTH; k++)
          out[at + k] = base[at + k] + scene.room + scene.fan * stripes[at + k] + noise[from + k];
      }
      addSpot(out, scene);
    },
  };
  return camera;
}

/** What does not change: the wall, the housing, four bolts; and where the fan's stripes show. */
function stillScene(): { base: Float32Array; stripes: Float32Array } {
  const base = new Float32Array(PIXELS);
  const stripes = new Float32Array(PIXELS);
  for (let row = 0; row < HEIGHT; row++) {
    for (let k = 0; k < WIDTH; k++) {
      const [dx, dy] = [(k - WIDTH / 2) / 110, (row - HEIGHT / 2) / 80];
      const housing = 1 / (1 + Math.exp(12 * (dx * dx + dy * dy - 1)));
      const bolt = Math.exp(-18 * ((Math.abs(dx) - 0.7) ** 2 + (Math.abs(dy) - 0.6) ** 2));
      base[row * WIDTH + k] = 21 + 0.01 * row + 14 * housing + 2 * bolt;
      stripes[row * WIDTH + k] = Math.sin((2 * Math.PI * (k + 0.3 * row)) / 70) * (0.4 + housing);
    }
  }
  return { base, stripes };
}

/** A round spot, of the two profiles' product, cut off where it is less than a ten-thousandth. */
function addSpot(out: Float32Array, { spotX, spotY, spotHeat }: Scene): void {
  const reach = Math.ceil(4.3 * SPOT_RADIUS);
  const profile = (k: number, centre: number): number => Math.exp(-((k - centre) ** 2) / (2 * SPOT_RADIUS ** 2));
  const [fromX, toX] = [Math.max(0, Math.floor(spotX) - reach), Math.min(WIDTH, Math.ceil(spotX) + reach)];
  const across = Float64Array.from({ length: Math.max(0, toX - fromX) }, (_, k) => profile(fromX + k, spotX));
  const toY = Math.min(HEIGHT, Math.ceil(spotY) + reach);
  for (let row = Math.max(0, Math.floor(spotY) - reach); row < toY; row++) {
    const heat = spotHeat * profile(row, spotY);
    const at = row * WIDTH + fromX;
    for (let k = 0; k < across.length; k++) out[at + k] += heat * across[k];
  }
}

/** A noisy oscillation of unit variance that keeps its phase for about `memory` seconds. */
function oscillator(hertz: number, memory: number, normal: () => number): () => number {
  const decay = Math.exp(-1 / (memory * RATE));
  const [cos, sin] = [decay * Math.cos((2 * Math.PI * hertz) / RATE), decay * Math.sin((2 * Math.PI * hertz) / RATE)];
  const drive = Math.sqrt(1 - decay * decay);
  let [re, im] = [normal(), normal()];
  return () => {
    [re, im] = [cos * re - sin * im + drive * normal(), sin * re + cos * im + drive * normal()];
    return re;
  };
}

/** A first-order wandering of unit variance, smoothed so that it has no jumps (two stages). */
function wanderer(memory: number, normal: () => number): () => number {
  const decay = Math.exp(-1 / (memory * RATE));
  const quick = Math.exp(-1 / RATE);
  const drive = Math.sqrt(1 - decay * decay);
  let [slow, smooth] = [normal(), 0];
  smooth = slow;
  return () => {
    slow = decay * slow + drive * normal();
    smooth += (1 - quick) * (slow - smooth);
    return smooth;
  };
}

/** sfc32, as in PractRand (public domain, from memory). */
function uniforms(seed: number): () => number {
  let [a, b, c, d] = [seed | 0, 0x9e3779b9 | 0, 0x243f6a88, 1];
  const next = (): number => {
    const t = (((a + b) | 0) + d) | 0;
    d = (d + 1) | 0;
    a = b ^ (b >>> 9);
    b = (c + (c << 3)) | 0;
    c = ((c << 21) | (c >>> 11)) + t;
    c |= 0;
    return (t >>> 0) / 4294967296;
  };
  for (let i = 0; i < 16; i++) next();
  return next;
}
