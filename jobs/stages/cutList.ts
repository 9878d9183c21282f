import { readFile } from 'node:fs/promises'
import type { FileStore } from '../../server/store/fileStore'
import type { Group } from '../../shared/measurement'
import type { Situation } from '../queue/inputs'
import { pathOf } from './inputs'

/** The groups as they were summed. */
export async function cutListOf(situation: Situation, store: FileStore): Promise<Group[]> {
  return JSON.parse(await readFile(pathOf(situation, store, 'sum', 'groups'), 'utf8')) as Group[]
}
