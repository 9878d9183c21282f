import { describe, expect, it } from 'vitest'
import { stateMarks, type AnyState } from '../../../composables/stateMarks'
import { acquisitionStates, frameSetStates, jobStates, uploadStates } from '../../../shared/states'

describe('state marks', () => {
  it('has a mark for every state of every machine', () => {
    for (const state of [...jobStates, ...uploadStates, ...acquisitionStates, ...frameSetStates]) expect(stateMarks[state], state).toBeDefined()
  })
  it.each([['jobs', jobStates], ['uploads', uploadStates], ['frame sets', frameSetStates]] as [string, readonly AnyState[]][])('tells the states of %s apart by shape alone', (_, states) => {
    expect(new Set(states.map(state => stateMarks[state].shape)).size).toBe(states.length)
  })
  it('shares a shape among acquisition states only where both ask for a missing file', () => {
    const rest = acquisitionStates.filter(state => state !== 'needs record')
    expect(new Set(rest.map(state => stateMarks[state].shape)).size).toBe(rest.length)
    expect(stateMarks['needs record']).toEqual(stateMarks['needs clip'])
  })
})
