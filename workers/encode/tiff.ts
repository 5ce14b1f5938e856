/** 16-bit TIFF files (TIFF 6.0, baseline layout, little-endian, one strip for about 64 kB). */

export interface TiffInput {
  width: number
  height: number
  channels: 1 | 3
  /** Interleaved samples, row 0 at the top. */
  data: Uint16Array
  /** ImageDescription; characters outside ASCII become "?". */
  description: string
}

const SHORT = 3
const LONG = 4
const ASCII = 2
const RATIONAL = 5

/** The bytes of a TIFF file. Throws a RangeError over the format's 4 GiB. */
export function encodeTiff16({ width, height, channels, data, description }: TiffInput): Uint8Array<ArrayBuffer> {
  if (data.length !== width * height * channels) throw new RangeError('The samples do not fill the image.')
  const rowBytes = width * channels * 2
  const rowsPerStrip = Math.max(1, Math.min(height, Math.floor(65_536 / rowBytes)))
  const strips = Math.ceil(height / rowsPerStrip)
  const text = `${description.replaceAll(/[^\x20-\x7e\n]/g, '?')}\0`
  const software = 'Lull\0'
  const entries: { tag: number, type: number, values: number[] | string }[] = [
    { tag: 256, type: LONG, values: [width] },
    { tag: 257, type: LONG, values: [height] },
    { tag: 258, type: SHORT, values: new Array<number>(channels).fill(16) },
    { tag: 259, type: SHORT, values: [1] },
    { tag: 262, type: SHORT, values: [channels === 3 ? 2 : 1] },
    { tag: 270, type: ASCII, values: text },
    { tag: 273, type: LONG, values: new Array<number>(strips).fill(0) },
    { tag: 277, type: SHORT, values: [channels] },
    { tag: 278, type: LONG, values: [rowsPerStrip] },
    { tag: 279, type: LONG, values: Array.from({ length: strips }, (_, i) => Math.min(rowsPerStrip, height - i * rowsPerStrip) * rowBytes) },
    { tag: 282, type: RATIONAL, values: [1, 1] },
    { tag: 283, type: RATIONAL, values: [1, 1] },
    { tag: 284, type: SHORT, values: [1] },
    // No unit: the pixel has no size on paper.
    { tag: 296, type: SHORT, values: [1] },
    { tag: 305, type: ASCII, values: software },
    { tag: 339, type: SHORT, values: new Array<number>(channels).fill(1) },
  ]
  const sizeOf = (type: number) => (type === SHORT ? 2 : type === ASCII ? 1 : 4)
  const bytesOf = ({ type, values }: typeof entries[number]) => values.length * sizeOf(type)
  const even = (n: number) => n + (n & 1)
  const directory = 8
  let extra = directory + 2 + 12 * entries.length + 4
  const places = entries.map((entry) => {
    if (bytesOf(entry) <= 4) return -1
    const place = extra
    extra = even(extra + bytesOf(entry))
    return place
  })
  const dataOffset = even(extra)
  const size = dataOffset + rowBytes * height
  if (size > 0xffffffff) throw new RangeError('A TIFF file holds at most 4 GiB; save the stack as FITS.')
  entries.find(entry => entry.tag === 273)!.values = Array.from({ length: strips }, (_, i) => dataOffset + i * rowsPerStrip * rowBytes)

  const file = new Uint8Array(size)
  const view = new DataView(file.buffer)
  file.set([0x49, 0x49, 42, 0])
  view.setUint32(4, directory, true)
  view.setUint16(directory, entries.length, true)
  entries.forEach((entry, i) => {
    const at = directory + 2 + 12 * i
    view.setUint16(at, entry.tag, true)
    view.setUint16(at + 2, entry.type, true)
    view.setUint32(at + 4, entry.type === RATIONAL ? entry.values.length / 2 : entry.values.length, true)
    let place = at + 8
    if (places[i] !== -1) {
      place = places[i]!
      view.setUint32(at + 8, place, true)
    }
    for (let k = 0; k < entry.values.length; k++) {
      if (typeof entry.values === 'string') file[place + k] = entry.values.charCodeAt(k)
      else if (entry.type === SHORT) view.setUint16(place + 2 * k, entry.values[k]!, true)
      else view.setUint32(place + 4 * k, entry.values[k]!, true)
    }
  })
  for (let i = 0; i < data.length; i++) view.setUint16(dataOffset + 2 * i, data[i]!, true)
  return file
}
