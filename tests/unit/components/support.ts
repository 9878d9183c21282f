import { readdirSync, readFileSync } from 'node:fs'
import { basename, join } from 'node:path'
import { mount } from '@vue/test-utils'
import { transformSync } from 'esbuild'
import { compileScript, parse } from 'vue/compiler-sfc'
import * as vue from 'vue'
import * as vueUse from '@vueuse/core'
import * as checks from '../../../shared/checks'
import * as permissions from '../../../shared/permissions'
import * as states from '../../../shared/states'
import * as bands from '../../../composables/bands'
import * as coverage from '../../../composables/coverage'
import * as format from '../../../composables/format'
import * as forms from '../../../composables/acquisitionForm'
import * as jobWords from '../../../composables/jobWords'
import * as numbers from '../../../composables/parse'
import * as stateMarks from '../../../composables/stateMarks'
import { stubAutoImports } from '../composables/autoImports'

/** What components under test import by themselves or get from Nuxt. */
const modules: Record<string, unknown> = { 'vue': vue, '@vueuse/core': vueUse, '#shared/checks': checks, '#shared/permissions': permissions, '#shared/states': states }
const root = join(import.meta.dirname, '../../../components')
const files = new Map(readdirSync(root, { recursive: true, encoding: 'utf8' }).filter(path => path.endsWith('.vue')).map(path => [basename(path, '.vue'), join(root, path)]))
const compiled = new Map<string, vue.Component>()

/** Compiles one component as the build does, template inlined; the other components are found by name, as in Nuxt. */
export function component(name: string): vue.Component {
  const known = compiled.get(name)
  if (known) return known
  const path = files.get(name)!
  const source = readFileSync(path, 'utf8')
  const { descriptor } = parse(source.includes('<script') ? source : `<script setup lang="ts">\nvoid 0\n</script>\n${source}`, { filename: path })
  const script = compileScript(descriptor, { id: name, inlineTemplate: true }).content
  const { code } = transformSync(script, { loader: 'ts', format: 'cjs' })
  const module = { exports: {} as { default?: vue.Component } }
  new Function('require', 'module', 'exports', code)((id: string) => modules[id], module, module.exports)
  compiled.set(name, module.exports.default!)
  return module.exports.default!
}

/** Mounts a component with every other one at hand, and a link in place of the router's. */
export function show(name: string, options: { props?: Record<string, unknown>, slots?: Record<string, string> } = {}) {
  const own = [bands, coverage, format, forms, jobWords, numbers, stateMarks]
  stubAutoImports(...own, { useAnnounce: () => ({ announce: () => undefined }), navigateTo: (to: string) => visited.push(to) })
  const others = Object.fromEntries([...files.keys()].filter(other => other !== name).map(other => [other, vue.defineAsyncComponent(async () => component(other))]))
  const NuxtLink = vue.defineComponent({ props: ['to'], setup: (props, { slots }) => () => vue.h('a', { href: props.to }, slots.default?.()) })
  return mount(component(name) as never, { ...options, attachTo: document.body, global: { mocks: Object.assign({}, ...own), components: { ...others, NuxtLink } } } as never) as ReturnType<typeof mount>
}
export const visited: string[] = []
export const settled = () => new Promise(resolve => setTimeout(resolve, 10))
