// AssemblyScript; compiled by scripts/build-kernels.mjs into ../binary.ts. The twin is workers/stack/accumulate.ts:
// the same float32 operations in the same order, so that both give the same integers.

const LIMIT: f32 = 4194303

// @ts-ignore: decorator
@inline
function clampRow(y: i32, last: i32): i32 {
  return y < 0 ? 0 : y > last ? last : y
}

/** Blends ny (1, 2, 4 or 6) source rows from row y into `row` (width floats). */
function blend(source: usize, width: i32, last: i32, y: i32, ny: i32, w0: f32, w1: f32, w2: f32, w3: f32, w4: f32, w5: f32, row: usize): void {
  const stride = <usize>width << 2
  const a = source + <usize>clampRow(y, last) * stride
  const end = stride & ~15
  if (ny == 1) {
    memory.copy(row, a, stride)
    return
  }
  const b = source + <usize>clampRow(y + 1, last) * stride
  const v0 = f32x4.splat(w0), v1 = f32x4.splat(w1)
  if (ny == 2) {
    for (let i: usize = 0; i < end; i += 16) {
      v128.store(row + i, f32x4.add(f32x4.mul(v0, v128.load(a + i)), f32x4.mul(v1, v128.load(b + i))))
    }
    for (let i = end; i < stride; i += 4) store<f32>(row + i, w0 * load<f32>(a + i) + w1 * load<f32>(b + i))
    return
  }
  const c = source + <usize>clampRow(y + 2, last) * stride
  const d = source + <usize>clampRow(y + 3, last) * stride
  const v2 = f32x4.splat(w2), v3 = f32x4.splat(w3)
  if (ny == 6) {
    const e = source + <usize>clampRow(y + 4, last) * stride
    const f = source + <usize>clampRow(y + 5, last) * stride
    const v4 = f32x4.splat(w4), v5 = f32x4.splat(w5)
    for (let i: usize = 0; i < end; i += 16) {
      const ab = f32x4.add(f32x4.mul(v0, v128.load(a + i)), f32x4.mul(v1, v128.load(b + i)))
      const abcd = f32x4.add(f32x4.add(ab, f32x4.mul(v2, v128.load(c + i))), f32x4.mul(v3, v128.load(d + i)))
      v128.store(row + i, f32x4.add(f32x4.add(abcd, f32x4.mul(v4, v128.load(e + i))), f32x4.mul(v5, v128.load(f + i))))
    }
    for (let i = end; i < stride; i += 4) {
      store<f32>(row + i, w0 * load<f32>(a + i) + w1 * load<f32>(b + i) + w2 * load<f32>(c + i) + w3 * load<f32>(d + i) + w4 * load<f32>(e + i) + w5 * load<f32>(f + i))
    }
    return
  }
  for (let i: usize = 0; i < end; i += 16) {
    const ab = f32x4.add(f32x4.mul(v0, v128.load(a + i)), f32x4.mul(v1, v128.load(b + i)))
    v128.store(row + i, f32x4.add(f32x4.add(ab, f32x4.mul(v2, v128.load(c + i))), f32x4.mul(v3, v128.load(d + i))))
  }
  for (let i = end; i < stride; i += 4) {
    store<f32>(row + i, w0 * load<f32>(a + i) + w1 * load<f32>(b + i) + w2 * load<f32>(c + i) + w3 * load<f32>(d + i))
  }
}

// @ts-ignore: decorator
@inline
function fixedLanes(value: v128): v128 {
  const clipped = f32x4.max(f32x4.min(value, f32x4.splat(LIMIT)), f32x4.splat(-LIMIT))
  return i32x4.trunc_sat_f32x4_s(f32x4.nearest(clipped))
}

// @ts-ignore: decorator
@inline
function fixedOne(value: f32): i32 {
  return i32x4.extract_lane(fixedLanes(f32x4.splat(value)), 0)
}

/** Reads nx (1, 2, 4 or 6) taps of `at` along x for n outputs, scales, rounds and adds sign times that to `sum`. */
function addRow(at: usize, n: i32, nx: i32, w0: f32, w1: f32, w2: f32, w3: f32, w4: f32, w5: f32, scale: f32, sign: i32, sum: usize): void {
  const v4 = f32x4.splat(w4), v5 = f32x4.splat(w5)
  const v0 = f32x4.splat(w0), v1 = f32x4.splat(w1), v2 = f32x4.splat(w2), v3 = f32x4.splat(w3), s = f32x4.splat(scale)
  const bytes = <usize>n << 2
  const end = bytes & ~15
  const flip = i32x4.splat(sign)
  for (let i: usize = 0; i < end; i += 16) {
    let value: v128
    if (nx >= 4) {
      const ab = f32x4.add(f32x4.mul(v0, v128.load(at + i)), f32x4.mul(v1, v128.load(at + i + 4)))
      value = f32x4.add(f32x4.add(ab, f32x4.mul(v2, v128.load(at + i + 8))), f32x4.mul(v3, v128.load(at + i + 12)))
      if (nx == 6) value = f32x4.add(f32x4.add(value, f32x4.mul(v4, v128.load(at + i + 16))), f32x4.mul(v5, v128.load(at + i + 20)))
    }
    else if (nx == 2) value = f32x4.add(f32x4.mul(v0, v128.load(at + i)), f32x4.mul(v1, v128.load(at + i + 4)))
    else value = v128.load(at + i)
    v128.store(sum + i, i32x4.add(v128.load(sum + i), i32x4.mul(flip, fixedLanes(f32x4.mul(value, s)))))
  }
  for (let i = end; i < bytes; i += 4) {
    let value: f32
    if (nx == 6) value = w0 * load<f32>(at + i) + w1 * load<f32>(at + i + 4) + w2 * load<f32>(at + i + 8) + w3 * load<f32>(at + i + 12) + w4 * load<f32>(at + i + 16) + w5 * load<f32>(at + i + 20)
    else if (nx == 4) value = w0 * load<f32>(at + i) + w1 * load<f32>(at + i + 4) + w2 * load<f32>(at + i + 8) + w3 * load<f32>(at + i + 12)
    else if (nx == 2) value = w0 * load<f32>(at + i) + w1 * load<f32>(at + i + 4)
    else value = load<f32>(at + i)
    store<i32>(sum + i, load<i32>(sum + i) + sign * fixedOne(value * scale))
  }
}

/**
 * Adds a plane to 32-bit sums. Outputs [x0, x1) × [y0, y1); the taps of output (x, y) start at source
 * (x + ox, y + oy). `row` needs width + 8 floats.
 */
export function addShifted(
  source: usize, width: i32, height: i32,
  x0: i32, x1: i32, ox: i32, nx: i32, wx0: f32, wx1: f32, wx2: f32, wx3: f32, wx4: f32, wx5: f32,
  y0: i32, y1: i32, oy: i32, ny: i32, wy0: f32, wy1: f32, wy2: f32, wy3: f32, wy4: f32, wy5: f32,
  scale: f32, sign: i32, sum: usize, row: usize,
): void {
  if (x1 <= x0) return
  const first = row + 12
  for (let y = y0; y < y1; y++) {
    blend(source, width, height - 1, y + oy, ny, wy0, wy1, wy2, wy3, wy4, wy5, first)
    const left = load<f32>(first), right = load<f32>(first + (<usize>(width - 1) << 2))
    store<f32>(row, left)
    store<f32>(row + 4, left)
    store<f32>(row + 8, left)
    store<f32>(first + (<usize>width << 2), right)
    store<f32>(first + (<usize>width << 2) + 4, right)
    store<f32>(first + (<usize>width << 2) + 8, right)
    addRow(first + (<isize>(x0 + ox) << 2), x1 - x0, nx, wx0, wx1, wx2, wx3, wx4, wx5, scale, sign, sum + (<usize>(y * width + x0) << 2))
  }
}
