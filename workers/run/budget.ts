const MB = 2 ** 20

/** Bytes of decoded frames to keep: an eighth of what the device says it has, 256-1024 MB; 512 MB where it does not say. */
export function memoryBudget(deviceMemoryGb = (globalThis.navigator as { deviceMemory?: number } | undefined)?.deviceMemory): number {
  if (!deviceMemoryGb) return 512 * MB
  return Math.max(256 * MB, Math.min(1024 * MB, deviceMemoryGb * 1024 * MB / 8))
}
