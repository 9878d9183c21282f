import { describe, expect, it } from 'vitest'
import { estimateShift } from '../../../jobs/imaging/shift'
import { normal, random, WaveTexture } from './pictures'

const texture = new WaveTexture(5)
const [width, height] = [180, 140]
const still = texture.picture(width, height)

describe('shift between two pictures', () => {
  it.each([[0, 0], [0.05, 0], [0, -0.03], [0.13, 0.41], [-0.5, 0.5], [1.27, -2.6], [4.5, 3.5], [-11.3, 9.8]])('recovers (%f, %f) px within 0.003 px: right and down are positive', (dx, dy) => {
    const found = estimateShift(still, texture.picture(width, height, dx, dy), width, height)
    expect(found.converged).toBe(true)
    expect(Math.abs(found.dx - dx)).toBeLessThan(0.003)
    expect(Math.abs(found.dy - dy)).toBeLessThan(0.003)
  })

  it('is the opposite when the pictures are exchanged', () => {
    const moved = texture.picture(width, height, 0.37, -0.21)
    const there = estimateShift(still, moved, width, height)
    const back = estimateShift(moved, still, width, height)
    expect(there.dx + back.dx).toBeCloseTo(0, 4)
    expect(there.dy + back.dy).toBeCloseTo(0, 4)
  })

  it('does not depend on gain and offset between the pictures', () => {
    const brighter = texture.picture(width, height, 0.22, 0.11).map(value => 1.3 * value + 200_000)
    const found = estimateShift(still, brighter, width, height)
    expect(Math.abs(found.dx - 0.22)).toBeLessThan(0.003)
    expect(Math.abs(found.dy - 0.11)).toBeLessThan(0.003)
  })

  it('stays within 0.01 px under 2 % of noise', () => {
    const next = random(8)
    const noisy = (picture: Uint32Array) => picture.map(value => Math.max(0, value + 20_000 * normal(next)))
    const found = estimateShift(noisy(still), noisy(texture.picture(width, height, 0.08, -0.06)), width, height)
    expect(Math.abs(found.dx - 0.08)).toBeLessThan(0.01)
    expect(Math.abs(found.dy + 0.06)).toBeLessThan(0.01)
  })

  it('holds for a large picture, which is read in nine tiles', () => {
    const [w, h] = [900, 820]
    const sparse = new WaveTexture(6, { count: 12 })
    const found = estimateShift(sparse.picture(w, h), sparse.picture(w, h, 0.31, -1.17), w, h)
    expect(Math.abs(found.dx - 0.31)).toBeLessThan(0.003)
    expect(Math.abs(found.dy + 1.17)).toBeLessThan(0.003)
  })

  it('is not a number where there is no texture, or none across one direction', () => {
    expect(estimateShift(new Uint32Array(100 * 100).fill(7), new Uint32Array(100 * 100).fill(7), 100, 100).dx).toBeNaN()
    const grating = Uint32Array.from({ length: 100 * 100 }, (_, i) => 1000 + 500 * Math.sin(i % 100))
    expect(estimateShift(grating, grating, 100, 100)).toMatchObject({ dx: Number.NaN, converged: false })
  })

  it('does not claim a match between different scenes', () => {
    const found = estimateShift(still, new WaveTexture(77).picture(width, height), width, height)
    expect(found.converged && found.correlation > 0.5).toBe(false)
  })

  it('refuses pictures that are too small to search', () => {
    expect(() => estimateShift(new Uint32Array(900), new Uint32Array(900), 30, 30)).toThrow(/Search less far/)
    expect(() => estimateShift(still, still, width, height - 1)).toThrow(RangeError)
  })
})
