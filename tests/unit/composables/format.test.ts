import { describe, expect, it } from 'vitest'
import { countOf, formatByteRate, formatBytes, formatDuration, formatExposure, formatHertz, formatNumber, formatPercent, formatSampleRate, formatSigned, formatSignificant, formatTrimmed, placeInLine } from '../../../composables/format'

const plain = (text: string) => text.replace(/[\u00A0\u202F]/g, ' ')

describe('numbers as the pages write them', () => {
  it('sets thin spaces from five digits on and a real minus', () => {
    expect(formatNumber(18204)).toBe('18\u202F204')
    expect(formatNumber(1348)).toBe('1348')
    expect(formatNumber(-1234567.891, 2)).toBe('−1\u202F234\u202F567.89')
  })
  it('never shows a minus before zero', () => {
    expect(formatNumber(-0.0004, 2)).toBe('0.00')
    expect(formatSigned(-0.04, 1)).toBe('0.0')
    expect(formatSigned(25.1)).toBe('+25.1')
  })
  it('shows what is not known as a dash, without a unit', () => {
    for (const text of [formatNumber(null), formatBytes(undefined), formatHertz(Number.NaN), formatPercent(null), formatDuration(null)]) expect(text).toBe('–')
  })
  it('keeps significant figures and writes extremes in powers of ten', () => {
    expect(formatSignificant(0.0149142, 4)).toBe('0.01491')
    expect(plain(formatSignificant(12345.678, 3))).toBe('12 346')
    expect(formatSignificant(3.2e-6, 3)).toBe('3.20·10⁻⁶')
    expect(formatSignificant(-5e8, 2)).toBe('−5.0·10⁸')
  })
  it('drops the zeros nobody typed', () => {
    expect(formatTrimmed(0.213, 4)).toBe('0.213')
    expect(formatTrimmed(10, 4)).toBe('10')
    expect(formatTrimmed(0, 4)).toBe('0')
  })
})

describe('units', () => {
  it('scales bytes by thousands, with three figures or so', () => {
    expect(plain(formatBytes(999))).toBe('999 B')
    expect(plain(formatBytes(12_400_000_000))).toBe('12.4 GB')
    expect(plain(formatBytes(412e9))).toBe('412 GB')
    expect(plain(formatBytes(999_600))).toBe('1.00 MB')
    expect(plain(formatByteRate(8_250_000))).toBe('8.25 MB/s')
  })
  it('says waiting times as people do', () => {
    expect([5, 59.4, 170, 3600, 4800, 86_400 * 23].map(seconds => plain(formatDuration(seconds)))).toEqual(['5 s', '59 s', '3 min', '1 h', '1 h 20 min', '23 days'])
  })
  it('does not claim 100 % before it is so', () => {
    expect(plain(formatPercent(0.9999))).toBe('99 %')
    expect(plain(formatPercent(1))).toBe('100 %')
    expect(plain(formatPercent(0.00071, 2))).toBe('0.07 %')
  })
  it('gives frequencies the decimals they have, two at most', () => {
    expect([412, 486.2, 731.25, 412.001].map(value => plain(formatHertz(value)))).toEqual(['412 Hz', '486.2 Hz', '731.25 Hz', '412 Hz'])
    expect(plain(formatSampleRate(25_600))).toBe('25.60 kHz')
    expect(plain(formatSampleRate(5000))).toBe('5000 Hz')
  })
  it('writes exposures as fractions when they are', () => {
    expect(plain(formatExposure(0.02))).toBe('1/50 s')
    expect(plain(formatExposure(0.0173))).toBe('0.01730 s')
  })
  it('counts in words', () => {
    expect(plain(countOf(1, 'line'))).toBe('1 line')
    expect(plain(countOf(4, 'line'))).toBe('4 lines')
    expect(placeInLine(2)).toBe('Second in line')
    expect(placeInLine(14)).toBe('Number 14 in line')
  })
})
