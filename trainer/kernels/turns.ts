/**
 * Cosine and sine of parts of a turn, in + and × alone, so that the factors of a Fourier transform are the same bits on
 * every machine; Math.cos is left approximate by the language.
 */

const SINE = [
  -0.16666666666666632, 0.00833333333332249, -0.0001984126982985795, 2.7557313707070068e-6, -2.5050760253406863e-8,
  1.58969099521155e-10,
] as const;
const COSINE = [
  0.0416666666666666, -0.001388888888887411, 2.480158728947673e-5, -2.7557314351390663e-7, 2.087572321298175e-9,
  -1.1359647557788195e-11,
] as const;
const TWO_PI = 6.283185307179586;

/**
 * Cosine and sine of 2π k/n.
 *
 * shapes  k a whole number, 0 <= k < n; n a power of two
 * units   parts of a turn
 * throws  nothing
 * source  the kernels of Sun's fdlibm 5.3 (1993), k_sin.c and k_cos.c, on |x| <= π/4, after folding into an eighth of a turn
 * cost    about 20 multiplications; error below 2e-16
 */
export function turn(k: number, n: number): [cos: number, sin: number] {
  // Eighths: the angle is folded into 0..π/4 by the symmetries of the circle, exactly, since n is a power of two.
  const part = k / n;
  const quarter = Math.floor(part * 4 + 0.5) % 4;
  const rest = (part - Math.floor(part * 4 + 0.5) / 4) * TWO_PI;
  const c = cosineNear(rest);
  const s = sineNear(rest);
  if (quarter === 0) return [c, s];
  if (quarter === 1) return [-s, c];
  if (quarter === 2) return [-c, -s];
  return [s, -c];
}

function sineNear(x: number): number {
  const z = x * x;
  const r = SINE[1] + z * (SINE[2] + z * (SINE[3] + z * (SINE[4] + z * SINE[5])));
  return x + z * x * (SINE[0] + z * r);
}

function cosineNear(x: number): number {
  const z = x * x;
  const r = z * (COSINE[0] + z * (COSINE[1] + z * (COSINE[2] + z * (COSINE[3] + z * (COSINE[4] + z * COSINE[5])))));
  const half = 0.5 * z;
  const w = 1 - half;
  return w + (1 - w - half + z * r);
}
