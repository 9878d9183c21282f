import { execFileSync } from 'node:child_process'
import { mkdtempSync, rmSync } from 'node:fs'
import { tmpdir } from 'node:os'
import { join } from 'node:path'
import { afterAll } from 'vitest'

/** A folder shared with Debian's Python, removed when the file's tests are done. */
export function numpyFolder() {
  const folder = mkdtempSync(join(tmpdir(), 'lampsum-numpy-'))
  afterAll(() => rmSync(folder, { recursive: true, force: true }))
  return {
    path: (name: string) => join(folder, name),
    /** Runs a script with the folder as its working directory; what it prints is JSON. */
    python: <T>(script: string): T => JSON.parse(execFileSync('/usr/bin/python3', ['-c', `import json, numpy as np\n${script}`], { cwd: folder, encoding: 'utf8', maxBuffer: 1 << 28 })) as T,
  }
}
