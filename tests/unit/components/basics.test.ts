// @vitest-environment happy-dom
import { describe, expect, it } from 'vitest'
import { acquisitionStates, jobStates, uploadStates } from '../../../shared/states'
import { settled, show } from './support'

describe('StateMark', () => {
  it.each([...new Set([...jobStates, ...uploadStates, ...acquisitionStates])])('says “%s” in words beside the shape', async (state) => {
    const mark = show('StateMark', { props: { state } })
    await settled()
    expect(mark.text()).toBe(state)
    expect(mark.find('svg').attributes('aria-hidden')).toBe('true')
  })
  it('keeps the word for screen readers when it is bare', async () => {
    const mark = show('StateMark', { props: { state: 'failed', bare: true } })
    expect(mark.find('.sr-only').text()).toBe('failed')
  })
})

describe('FlagList', () => {
  it('puts the gravest first and says how grave it is', async () => {
    const flags = [{ code: 'n', severity: 'note', message: 'Within limits.' }, { code: 'p', severity: 'problem', message: 'The record ends early.' }, { code: 'w', severity: 'warning', message: 'The camera moved.' }]
    const list = show('FlagList', { props: { flags } })
    expect(list.findAll('li').map(item => item.text())).toEqual(['Problem: The record ends early.', 'Warning: The camera moved.', 'Note: Within limits.'])
  })
})

describe('ProgressBar', () => {
  it('tells its value to assistive technology and stays inside', () => {
    const bar = show('ProgressBar', { props: { value: 1.7, label: 'sum of acquisition 12' } })
    expect(bar.attributes()).toMatchObject({ 'role': 'progressbar', 'aria-valuenow': '100', 'aria-label': 'sum of acquisition 12' })
    expect(bar.find('.bg-accent').attributes('style')).toContain('100%')
  })
})

describe('fields', () => {
  it('ties label, hint and error to the control', async () => {
    const field = show('TextField', { props: { label: 'Title', modelValue: '', hint: 'Short.', error: 'Give a title.' } })
    await settled()
    const input = field.find('input')
    expect(field.find('label').attributes('for')).toBe(input.attributes('id'))
    expect(input.attributes('aria-invalid')).toBe('true')
    const described = input.attributes('aria-describedby')!.split(' ').map(id => document.getElementById(id)?.textContent?.trim())
    expect(described).toEqual(['Give a title.', 'Short.'])
  })
  it('reads a decimal comma and a real minus, and empties to null', async () => {
    const field = show('NumberField', { props: { label: 'Offset', unit: 's', modelValue: null } })
    await settled()
    for (const [typed, value] of [['0,413', 0.413], ['−2', -2], ['', null]] as const) {
      await field.find('input').setValue(typed)
      expect(field.emitted('update:modelValue')!.at(-1)).toEqual([value])
    }
  })
  it('says when a number is none, and gives null rather than a guess', async () => {
    const field = show('NumberField', { props: { label: 'Offset', modelValue: 3 } })
    await settled()
    await field.find('input').setValue('3 apples')
    await settled()
    expect(field.text()).toContain('This is not a number.')
    expect(field.emitted('update:modelValue')!.at(-1)).toEqual([null])
  })
})

describe('SafetyCautions', () => {
  it('names seizures with their range and beats, still-looking parts, eyes and skin, shakers, and ends with the site\'s rules', () => {
    const text = show('SafetyCautions').text()
    for (const words of ['photosensitive seizures', '3–60 Hz', 'beats', 'rotating parts look still', 'eyes and skin', 'pinch', 'loud', 'stored energy']) expect(text).toContain(words)
    expect(text).toMatch(/Follow your site’s rules and qualified safety staff\.$/)
  })
})
