/**
 * The Walsh-Hadamard transform in natural order (Fino & Algazi 1976), three bits of the index in one pass over the memory.
 * The bits are taken in order, so the sums are those of the plain loops, bit by bit. Pointers and distances are in bytes.
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
  passes<f64>(x, end);
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
  passes<f32>(x, end);
}

function smallHadamard32(x: usize, n: i32): void {
  if (n < 2) return;
  const a = f32.load(x);
  const b = f32.load(x, 4);
  f32.store(x, a + b);
  f32.store(x, a - b, 4);
}

/** The bits above those inside a register: three at a time, then what is left. */
function passes<T>(x: usize, end: usize): void {
  let half: usize = 16;
  for (; half << 3 <= end - x; half <<= 3) threeBits<T>(x, end, half);
  if (half << 2 <= end - x) twoBits<T>(x, end, half);
  else if (half << 1 <= end - x) oneBit<T>(x, end, half);
}

function oneBit<T>(x: usize, end: usize, half: usize): void {
  for (let block = x; block < end; block += half << 1) {
    for (let at = block; at < block + half; at += 16) {
      const a = v128.load(at);
      const b = v128.load(at + half);
      v128.store(at, v128.add<T>(a, b));
      v128.store(at + half, v128.sub<T>(a, b));
    }
  }
}

function twoBits<T>(x: usize, end: usize, half: usize): void {
  for (let block = x; block < end; block += half << 2) {
    for (let at = block; at < block + half; at += 16) {
      const third = at + (half << 1);
      const a = v128.load(at);
      const b = v128.load(at + half);
      const c = v128.load(third);
      const d = v128.load(third + half);
      const s0 = v128.add<T>(a, b);
      const s1 = v128.sub<T>(a, b);
      const s2 = v128.add<T>(c, d);
      const s3 = v128.sub<T>(c, d);
      v128.store(at, v128.add<T>(s0, s2));
      v128.store(at + half, v128.add<T>(s1, s3));
      v128.store(third, v128.sub<T>(s0, s2));
      v128.store(third + half, v128.sub<T>(s1, s3));
    }
  }
}

function threeBits<T>(x: usize, end: usize, half: usize): void {
  for (let block = x; block < end; block += half << 3) {
    for (let at = block; at < block + half; at += 16) {
      const third = at + (half << 1);
      const fifth = at + (half << 2);
      const seventh = fifth + (half << 1);
      let a = v128.load(at);
      let b = v128.load(at + half);
      const s0 = v128.add<T>(a, b);
      const s1 = v128.sub<T>(a, b);
      a = v128.load(third);
      b = v128.load(third + half);
      const s2 = v128.add<T>(a, b);
      const s3 = v128.sub<T>(a, b);
      a = v128.load(fifth);
      b = v128.load(fifth + half);
      const s4 = v128.add<T>(a, b);
      const s5 = v128.sub<T>(a, b);
      a = v128.load(seventh);
      b = v128.load(seventh + half);
      const s6 = v128.add<T>(a, b);
      const s7 = v128.sub<T>(a, b);
      const t0 = v128.add<T>(s0, s2);
      const t2 = v128.sub<T>(s0, s2);
      const t4 = v128.add<T>(s4, s6);
      const t6 = v128.sub<T>(s4, s6);
      v128.store(at, v128.add<T>(t0, t4));
      v128.store(fifth, v128.sub<T>(t0, t4));
      v128.store(third, v128.add<T>(t2, t6));
      v128.store(seventh, v128.sub<T>(t2, t6));
      const t1 = v128.add<T>(s1, s3);
      const t3 = v128.sub<T>(s1, s3);
      const t5 = v128.add<T>(s5, s7);
      const t7 = v128.sub<T>(s5, s7);
      v128.store(at + half, v128.add<T>(t1, t5));
      v128.store(fifth + half, v128.sub<T>(t1, t5));
      v128.store(third + half, v128.add<T>(t3, t7));
      v128.store(seventh + half, v128.sub<T>(t3, t7));
    }
  }
}
