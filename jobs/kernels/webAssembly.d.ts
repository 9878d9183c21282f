/** The part of the WebAssembly JavaScript interface that Node has and its types leave out. */
declare namespace WebAssembly {
  class Memory {
    constructor(descriptor: { initial: number, maximum?: number })
    readonly buffer: ArrayBuffer
    grow(pages: number): number
  }
  type Module = object
  const Module: new (bytes: Uint8Array) => Module
  class Instance {
    constructor(module: Module, imports: Record<string, Record<string, unknown>>)
    readonly exports: Record<string, unknown>
  }
}
