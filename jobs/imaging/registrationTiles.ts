import type { Rectangle } from './accumulate'

/** Interpolation and derivative reach this far. */
export const filterReach = 10
const tileSize = 96

/**
 * Parts of a picture to register by: the whole of a small one, nine tiles spread over a large one. Each keeps clear of
 * the border by the search range and the reach of the filters.
 *
 * @throws RangeError when the picture is too small for the search
 */
export function registrationTiles(width: number, height: number, searchPixels: number): Rectangle[] {
  const margin = searchPixels + filterReach
  const inner = { width: width - 2 * margin, height: height - 2 * margin }
  if (inner.width < 8 || inner.height < 8) throw new RangeError(`A picture of ${width}×${height} is too small to search ${searchPixels} pixels. Search less far.`)
  const along = (length: number) => length <= 3 * tileSize ? [{ from: margin, length }] : [0, 0.5, 1].map(part => ({ from: margin + Math.round(part * (length - tileSize)), length: tileSize }))
  return along(inner.height).flatMap(rows => along(inner.width).map(columns => ({ left: columns.from, top: rows.from, width: columns.length, height: rows.length })))
}
