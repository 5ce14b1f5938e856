/**
 * Stage results as bytes: a JSON head, then the raw typed arrays, each from a multiple of eight. Little-endian
 * hosts only, like every browser and Node today; nothing leaves the machine in this form.
 */
type Column = Float64Array | Float32Array | Int32Array | Uint8Array | Uint16Array
const kinds = { f64: Float64Array, f32: Float32Array, i32: Int32Array, u8: Uint8Array, u16: Uint16Array } as const
type Kind = keyof typeof kinds

const MAGIC = 0x4c554c31

const kindOf = (array: Column): Kind => (Object.keys(kinds) as Kind[]).find(kind => array instanceof kinds[kind])!
const padded = (length: number) => Math.ceil(length / 8) * 8

/** Packs a plain object; typed arrays anywhere in it are stored raw. */
export function pack(value: unknown): Uint8Array<ArrayBuffer> {
  const columns: Column[] = []
  const head = new TextEncoder().encode(JSON.stringify(value, (_key, item: unknown) => {
    if (typeof item === 'number' && !Number.isFinite(item)) return { $number: String(item) }
    if (!ArrayBuffer.isView(item)) return item
    columns.push(item as Column)
    return { $column: columns.length - 1, kind: kindOf(item as Column), length: (item as Column).length }
  }))
  const start = padded(12 + head.length)
  const out = new Uint8Array(start + columns.reduce((sum, column) => sum + padded(column.byteLength), 0))
  const view = new DataView(out.buffer)
  view.setUint32(0, MAGIC)
  view.setUint32(4, head.length)
  view.setUint32(8, out.length)
  out.set(head, 12)
  let at = start
  for (const column of columns) {
    out.set(new Uint8Array(column.buffer, column.byteOffset, column.byteLength), at)
    at += padded(column.byteLength)
  }
  return out
}

/** The object back, or null for bytes that are not whole. */
export function unpack<T>(bytes: Uint8Array): T | null {
  if (bytes.length < 12) return null
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength)
  const length = view.getUint32(4)
  if (view.getUint32(0) !== MAGIC || view.getUint32(8) !== bytes.length || 12 + length > bytes.length) return null
  let at = padded(12 + length)
  return JSON.parse(new TextDecoder().decode(bytes.subarray(12, 12 + length)), (_key, item: unknown) => {
    if (typeof item !== 'object' || item === null) return item
    if ('$number' in item) return Number(item.$number)
    if (!('$column' in item)) return item
    const { kind, length: count } = item as unknown as { kind: Kind, length: number }
    const make = kinds[kind]
    const size = count * make.BYTES_PER_ELEMENT
    const column = new make(bytes.slice(at, at + size).buffer)
    at += padded(size)
    return column
  }) as T
}
