import { buildIfStale } from './lib/build'
import { run } from './lib/run'

run(async () => {
  console.log(await buildIfStale() ? 'Built.' : 'The build is up to date.')
})
