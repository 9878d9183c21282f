const chunkLength = 1 << 18

/** float32 values of unknown number; grows by whole chunks, so nothing is copied while it grows. */
export class GrowingFloat32 {
  private readonly full: Float32Array[] = []
  private chunk = new Float32Array(chunkLength)
  private used = 0

  push(value: number): void {
    if (this.used === chunkLength) {
      this.full.push(this.chunk)
      this.chunk = new Float32Array(chunkLength)
      this.used = 0
    }
    this.chunk[this.used++] = value
  }

  /** All values in one array; the chunks are given up, so this is the last call. */
  take(): Float32Array {
    const all = new Float32Array(this.full.length * chunkLength + this.used)
    all.set(this.chunk.subarray(0, this.used), this.full.length * chunkLength)
    for (let i = this.full.length - 1; i >= 0; i--) all.set(this.full.pop()!, i * chunkLength)
    return all
  }
}
