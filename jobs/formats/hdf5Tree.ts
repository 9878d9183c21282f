import type { Dataset, Entity, File, Group } from 'h5wasm'
import { splitUnit } from './csvLayout'
import type { RecordColumn } from './recordTable'

/** One channel of a dataset. */
export interface Hdf5Column extends RecordColumn {
  dataset: Dataset
  rows: number
  /** For two dimensions: which index counts samples, and the channel's place on the other one. */
  sampleAxis: 0 | 1
  channel: number | null
  sampleRateHz: number | null
  startSeconds: number
}

type Attributes = ReadonlyMap<string, unknown>

const deepest = 12
const mostDatasets = 2000
const mostChannels = 4096
const integerClass = 0
const floatClass = 1
const ratePattern = /^(?:fs|rate|sampl(?:e|ing)[_ ]?(?:rate|freq(?:uency)?)(?:[_ ]?hz)?)$/i
const stepPattern = /^(?:dt|delta[_ ]?t|sampl(?:e|ing)[_ ]?(?:interval|period)(?:[_ ]?s(?:econds)?)?|[a-z]*_?increment)$/i
const startPattern = /^(?:t0|start[_ ]?(?:time|seconds)?(?:[_ ]?s)?|[a-z]*_?start_offset)$/i
const unitPattern = /^(?:units?|eu|[a-z]*_?unit_?(?:string)?)$/i
const namesPattern = /^(?:names?|channels?|channel[_ ]?names?|columns?|labels?)$/i

/**
 * Every channel that an HDF5 file may hold: its datasets of numbers, one-dimensional or two-dimensional with the longer
 * axis as samples. Units, names, sample rate, interval and start come from attributes of the dataset or of the groups
 * that hold it, the rate also from a single number beside it.
 *
 * @returns the columns, and what was passed over
 */
export function findHdf5Columns(file: File): { columns: Hdf5Column[], passedOver: string[] } {
  const columns: Hdf5Column[] = []
  const passedOver: string[] = []
  let datasets = 0
  const walk = (group: Group, path: string, outer: Attributes, depth: number) => {
    const entries = group.keys().map(name => [name, group.get(name)] as const)
    const scalars = entries.flatMap(([name, entity]) => isDataset(entity) && isNumeric(entity) && entity.metadata.total_size === 1 ? [[name, numberOf(entity.value)] as const] : [])
    const known = new Map([...outer, ...scalars, ...attributesOf(group)])
    for (const [name, entity] of entries) {
      const full = path ? `${path}/${name}` : name
      if (isDataset(entity) && entity.metadata.total_size !== 1) {
        if (datasets++ >= mostDatasets) return
        const found = columnsOf(entity, full, known)
        if (found) columns.push(...found)
        else passedOver.push(full)
      } else if (isGroup(entity) && depth < deepest) walk(entity, full, known, depth + 1)
    }
  }
  walk(file, '', new Map(), 0)
  return { columns: columns.map((column, index) => ({ ...column, index })), passedOver }
}

const isDataset = (entity: Entity | null): entity is Dataset => entity !== null && 'type' in entity && (entity.type as string) === 'Dataset'
const isGroup = (entity: Entity | null): entity is Group => entity !== null && 'type' in entity && (entity.type as string) === 'Group'
const isNumeric = ({ metadata: { type, vlen, size } }: Dataset) => !vlen && (type === integerClass || (type === floatClass && size <= 8))

function columnsOf(dataset: Dataset, path: string, outer: Attributes): Hdf5Column[] | null {
  const { shape } = dataset.metadata
  if (!shape || shape.length < 1 || shape.length > 2 || !isNumeric(dataset)) return null
  const own = attributesOf(dataset)
  const known = new Map([...outer, ...own])
  const sampleAxis = shape.length === 2 && shape[1] > shape[0] ? 1 : 0
  const channels = shape.length === 1 ? 1 : shape[1 - sampleAxis]
  if (channels > mostChannels || channels === 0) return null
  const names = listOf(own, namesPattern)
  const units = listOf(own, unitPattern)
  return Array.from({ length: channels }, (_, channel) => {
    const header = channels === 1 ? path : names.length === channels ? names[channel] : `${path}[${channel}]`
    const split = splitUnit(header)
    return {
      index: 0, header, name: split.name, unit: (units.length === channels ? units[channel] : units.length === 1 ? units[0] : null) || split.unit,
      dataset, rows: shape[sampleAxis], sampleAxis, channel: shape.length === 2 ? channel : null, sampleRateHz: rateOf(known), startSeconds: find(known, startPattern) ?? 0,
    }
  })
}

function rateOf(known: Attributes): number | null {
  const rate = find(known, ratePattern)
  const step = find(known, stepPattern)
  return rate !== null && rate > 0 ? rate : step !== null && step > 0 ? 1 / step : null
}

/** The innermost wins: it was put in last. */
function find(known: Attributes, pattern: RegExp): number | null {
  const values = [...known].filter(([name]) => pattern.test(name)).map(([, value]) => numberOf(value))
  return values.findLast(value => value !== null) ?? null
}

function numberOf(value: unknown): number | null {
  const first = typeof value === 'object' && value !== null && 'length' in value ? (value as ArrayLike<unknown>)[0] : value
  const number = typeof first === 'string' ? Number(first || Number.NaN) : Number(first)
  return Number.isFinite(number) && typeof first !== 'boolean' && first !== null ? number : null
}

function listOf(own: Attributes, pattern: RegExp): string[] {
  const value = [...own].find(([name]) => pattern.test(name))?.[1]
  if (typeof value === 'string') return value.includes(',') ? value.split(',').map(text => text.trim()) : [value.trim()]
  return Array.isArray(value) ? value.map(text => String(text).trim()) : []
}

function attributesOf(entity: Dataset | Group): Attributes {
  const values = new Map<string, unknown>()
  for (const [name, attribute] of Object.entries(entity.attrs)) {
    try {
      values.set(name, attribute.value)
    } catch {
      // An attribute of a type that the library does not read says nothing here.
    }
  }
  return values
}
