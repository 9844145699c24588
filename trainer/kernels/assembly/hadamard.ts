/**
 * Passes of the Walsh-Hadamard transform in natural order (Fino & Algazi 1976), one bit of the index after the other, so
 * that every way of blocking gives the sums of the plain loops, bit by bit. Pointers are byte offsets.
 */

/** All bits of n float64 in place, n a power of two. */
export function hadamard64(x: usize, n: i32): void {
  if (n < 2) return;
  const end = x + (<usize>n << 3);
  for (let at = x; at < end; at += 16) {
    const a = v128.load_splat<f64>(at);
    const b = v128.load_splat<f64>(at, 8);
    v128.store(at, v128.shuffle<f64>(f64x2.add(a, b), f64x2.sub(a, b), 0, 2));
  }
  for (let half: usize = 16; half < <usize>n << 3; half <<= 1) {
    for (let block = x; block < end; block += 2 * half) {
      for (let at = block; at < block + half; at += 16) {
        const a = v128.load(at);
        const b = v128.load(at + half);
        v128.store(at, f64x2.add(a, b));
        v128.store(at + half, f64x2.sub(a, b));
      }
    }
  }
}

/** All bits of n float32 in place, n a power of two. */
export function hadamard32(x: usize, n: i32): void {
  if (n < 4) {
    smallHadamard32(x, n);
    return;
  }
  const end = x + (<usize>n << 2);
  for (let at = x; at < end; at += 16) {
    const v = v128.load(at);
    const even = v128.shuffle<f32>(v, v, 0, 0, 2, 2);
    const odd = v128.shuffle<f32>(v, v, 1, 1, 3, 3);
    const pair = v128.shuffle<f32>(f32x4.add(even, odd), f32x4.sub(even, odd), 0, 5, 2, 7);
    const low = v128.shuffle<f32>(pair, pair, 0, 1, 0, 1);
    const high = v128.shuffle<f32>(pair, pair, 2, 3, 2, 3);
    v128.store(at, v128.shuffle<f32>(f32x4.add(low, high), f32x4.sub(low, high), 0, 1, 6, 7));
  }
  for (let half: usize = 16; half < <usize>n << 2; half <<= 1) {
    for (let block = x; block < end; block += 2 * half) {
      for (let at = block; at < block + half; at += 16) {
        const a = v128.load(at);
        const b = v128.load(at + half);
        v128.store(at, f32x4.add(a, b));
        v128.store(at + half, f32x4.sub(a, b));
      }
    }
  }
}

function smallHadamard32(x: usize, n: i32): void {
  if (n < 2) return;
  const a = f32.load(x);
  const b = f32.load(x, 4);
  f32.store(x, a + b);
  f32.store(x, a - b, 4);
}
