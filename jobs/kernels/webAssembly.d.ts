/** The part of the WebAssembly JavaScript interface that Node has and its types leave out. */
declare namespace WebAssembly {
  class Memory {
    constructor(descriptor: { initial: number, maximum?: number })
    readonly buffer: ArrayBuffer
    grow(pages: number): number
  }
  class Module {
    constructor(bytes: Uint8Array)
    private readonly opaque: unknown
  }
  class Instance {
    constructor(module: Module, imports: Record<string, Record<string, unknown>>)
    readonly exports: Record<string, unknown>
  }
}
