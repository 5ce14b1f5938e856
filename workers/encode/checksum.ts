/** FITS checksums (FITS Standard 4.0, appendix J; Seaman, Pence & Rots). */

/** Ones'-complement sum of big-endian 32-bit words, carried on from `sum`. The length must be a multiple of 4. */
export function checksumOf(bytes: Uint8Array, sum = 0): number {
  if (bytes.byteLength % 4 !== 0) throw new RangeError('A FITS checksum is over whole 32-bit words.')
  let high = sum >>> 16
  let low = sum & 0xffff
  for (let i = 0; i < bytes.byteLength; i += 4) {
    high += (bytes[i]! << 8) | bytes[i + 1]!
    low += (bytes[i + 2]! << 8) | bytes[i + 3]!
    // Doubles hold these sums exactly for far longer than a block; folded now and then all the same.
    if ((i & 0xffff) === 0) {
      const carryHigh = Math.floor(high / 65536)
      const carryLow = Math.floor(low / 65536)
      high = (high % 65536) + carryLow
      low = (low % 65536) + carryHigh
    }
  }
  while (high > 0xffff || low > 0xffff) {
    const carryHigh = Math.floor(high / 65536)
    const carryLow = Math.floor(low / 65536)
    high = (high % 65536) + carryLow
    low = (low % 65536) + carryHigh
  }
  return high * 65536 + low
}

const isPunctuation = (code: number) => (code >= 0x3a && code <= 0x40) || (code >= 0x5b && code <= 0x60)

/** The sixteen characters of a CHECKSUM card for a sum; `complement` as the card needs it. */
export function encodeChecksum(sum: number, complement = true): string {
  const value = complement ? (0xffffffff - sum) >>> 0 : sum >>> 0
  const out = new Array<number>(16)
  for (let i = 0; i < 4; i++) {
    const byte = (value >>> (24 - 8 * i)) & 0xff
    const quotient = Math.floor(byte / 4) + 48
    const four = [quotient + byte % 4, quotient, quotient, quotient]
    for (let again = true; again;) {
      again = false
      for (let j = 0; j < 4; j += 2) {
        if (isPunctuation(four[j]!) || isPunctuation(four[j + 1]!)) {
          four[j]!++
          four[j + 1]!--
          again = true
        }
      }
    }
    for (let j = 0; j < 4; j++) out[4 * j + i] = four[j]!
  }
  return String.fromCharCode(out[15]!, ...out.slice(0, 15))
}
