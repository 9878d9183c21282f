import { fileURLToPath } from 'node:url'
import { readFileSync } from 'node:fs'
import asc from 'assemblyscript/asc'

export const kernelNames = ['light'] as const
export type KernelName = (typeof kernelNames)[number]

const folder = new URL('../../jobs/kernels/', import.meta.url)

export const kernelFile = (name: KernelName) => fileURLToPath(new URL(`${name}.wasm.ts`, folder))

/** WebAssembly of a kernel; the same source gives the same bytes. */
export async function compileKernel(name: KernelName): Promise<Uint8Array> {
  const source = readFileSync(new URL(`assembly/${name}.ts`, folder), 'utf8')
  let binary: Uint8Array | undefined
  const { error, stderr } = await asc.main([`${name}.ts`, '--outFile', `${name}.wasm`, '-O3', '--converge', '--noAssert', '--runtime', 'stub', '--importMemory', '--enable', 'simd'], {
    readFile: file => file === `${name}.ts` ? source : null,
    writeFile: (file, contents) => {
      if (file.endsWith('.wasm')) binary = contents as unknown as Uint8Array
    },
    listFiles: () => [],
  })
  if (error || !binary) throw new Error(`AssemblyScript refused ${name}.ts:\n${stderr.toString()}`)
  return binary
}
