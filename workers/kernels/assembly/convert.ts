// Stored integer samples to float32, and how many are at or above a limit. The twins are plainConvert in workers/prepare/frame.ts
// and addSamples in workers/kernels/index.ts.

/** n samples of 16 bits from `source` to floats at `out`; returns how many are ≥ limit (none where limit > 65535). */
export function fromU16(source: usize, out: usize, n: i32, limit: i32): i32 {
  let count: i32 = 0
  const clip = limit <= 65535
  const level = i16x8.splat(<i16>limit)
  const end = n & ~7
  for (let i = 0; i < end; i += 8) {
    const v = v128.load(source + (<usize>i << 1))
    const to = out + (<usize>i << 2)
    v128.store(to, f32x4.convert_i32x4_u(i32x4.extend_low_i16x8_u(v)))
    v128.store(to + 16, f32x4.convert_i32x4_u(i32x4.extend_high_i16x8_u(v)))
    if (clip) count += popcnt(i16x8.bitmask(i16x8.ge_u(v, level)))
  }
  for (let i = end; i < n; i++) {
    const v = <i32>load<u16>(source + (<usize>i << 1))
    store<f32>(out + (<usize>i << 2), <f32>v)
    if (v >= limit) count++
  }
  return count
}

/** The same for samples of 8 bits. */
export function fromU8(source: usize, out: usize, n: i32, limit: i32): i32 {
  let count: i32 = 0
  const clip = limit <= 255
  const level = i8x16.splat(<i8>limit)
  const end = n & ~15
  for (let i = 0; i < end; i += 16) {
    const v = v128.load(source + <usize>i)
    const low = i16x8.extend_low_i8x16_u(v), high = i16x8.extend_high_i8x16_u(v)
    const to = out + (<usize>i << 2)
    v128.store(to, f32x4.convert_i32x4_u(i32x4.extend_low_i16x8_u(low)))
    v128.store(to + 16, f32x4.convert_i32x4_u(i32x4.extend_high_i16x8_u(low)))
    v128.store(to + 32, f32x4.convert_i32x4_u(i32x4.extend_low_i16x8_u(high)))
    v128.store(to + 48, f32x4.convert_i32x4_u(i32x4.extend_high_i16x8_u(high)))
    if (clip) count += popcnt(i8x16.bitmask(i8x16.ge_u(v, level)))
  }
  for (let i = end; i < n; i++) {
    const v = <i32>load<u8>(source + <usize>i)
    store<f32>(out + (<usize>i << 2), <f32>v)
    if (v >= limit) count++
  }
  return count
}

/** Adds n 16-bit samples to 32-bit sums. */
export function sumU16(source: usize, sum: usize, n: i32): void {
  const end = n & ~7
  for (let i = 0; i < end; i += 8) {
    const v = v128.load(source + (<usize>i << 1))
    const to = sum + (<usize>i << 2)
    v128.store(to, i32x4.add(v128.load(to), i32x4.extend_low_i16x8_u(v)))
    v128.store(to + 16, i32x4.add(v128.load(to + 16), i32x4.extend_high_i16x8_u(v)))
  }
  for (let i = end; i < n; i++) store<u32>(sum + (<usize>i << 2), load<u32>(sum + (<usize>i << 2)) + <u32>load<u16>(source + (<usize>i << 1)))
}

/** Adds n 8-bit samples to 32-bit sums. */
export function sumU8(source: usize, sum: usize, n: i32): void {
  const end = n & ~15
  for (let i = 0; i < end; i += 16) {
    const v = v128.load(source + <usize>i)
    const low = i16x8.extend_low_i8x16_u(v), high = i16x8.extend_high_i8x16_u(v)
    const to = sum + (<usize>i << 2)
    v128.store(to, i32x4.add(v128.load(to), i32x4.extend_low_i16x8_u(low)))
    v128.store(to + 16, i32x4.add(v128.load(to + 16), i32x4.extend_high_i16x8_u(low)))
    v128.store(to + 32, i32x4.add(v128.load(to + 32), i32x4.extend_low_i16x8_u(high)))
    v128.store(to + 48, i32x4.add(v128.load(to + 48), i32x4.extend_high_i16x8_u(high)))
  }
  for (let i = end; i < n; i++) store<u32>(sum + (<usize>i << 2), load<u32>(sum + (<usize>i << 2)) + <u32>load<u8>(source + <usize>i))
}
