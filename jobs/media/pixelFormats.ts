/** Pixels of a picture; a few kilobytes can claim a picture that takes gigabytes. */
export const maximumPixels = 8192 * 4320

/** Pixel formats whose luma plane ffmpeg's extractplanes hands over as raw codes, low bits first. */
export const lumaFormats: Record<string, { bitDepth: 8 | 10, isGray: boolean }> = {
  ...of(8, false, 'yuv420p', 'yuvj420p', 'yuv422p', 'yuvj422p', 'yuv444p', 'yuvj444p', 'nv12'),
  ...of(10, false, 'yuv420p10le', 'yuv422p10le', 'yuv444p10le'),
  ...of(8, true, 'gray'),
  ...of(10, true, 'gray10le'),
}

function of(bitDepth: 8 | 10, isGray: boolean, ...names: string[]) {
  return Object.fromEntries(names.map(name => [name, { bitDepth, isGray }]))
}
