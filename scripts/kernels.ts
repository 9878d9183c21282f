/** `npm run kernels`: compiles jobs/kernels/assembly into TypeScript files that hold the WebAssembly; a test proves they are fresh. */
import { writeFileSync } from 'node:fs'
import { compileKernel, kernelFile, kernelNames } from './lib/kernels'

for (const name of kernelNames) {
  const bytes = await compileKernel(name)
  writeFileSync(kernelFile(name), `// Made by “npm run kernels” from assembly/${name}.ts. Do not edit.\nexport const ${name}Wasm = '${Buffer.from(bytes).toString('base64')}'\n`)
  console.log(`jobs/kernels/${name}.wasm.ts: ${bytes.length} bytes`)
}
