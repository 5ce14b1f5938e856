/** Where bytes come from: a picked file, a file on disk, HTTP ranges of an archived capture, memory. */
export interface ByteSource {
  readonly name: string
  /** Bytes in all. */
  readonly size: number
  /**
   * The bytes [offset, offset + length). Rejects with a RangeError outside of the source, with an AbortError
   * when the signal fires, and with a CaptureError of code "unreadable" when the medium fails.
   */
  read(offset: number, length: number, signal?: AbortSignal): Promise<Uint8Array<ArrayBuffer>>
}
