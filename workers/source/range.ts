/** Throws a RangeError unless [offset, offset + length) lies within a source of `size` bytes. */
export function checkRange(name: string, size: number, offset: number, length: number): void {
  if (!Number.isSafeInteger(offset) || !Number.isSafeInteger(length) || offset < 0 || length < 0 || offset + length > size) {
    throw new RangeError(`Bytes ${offset} to ${offset + length} do not lie within ${name} (${size} bytes).`)
  }
}
