/** Bytes that structure text files of numbers. */
export const newline = 0x0a
export const carriageReturn = 0x0d
export const tab = 0x09
export const space = 0x20
export const comma = 0x2c
export const minus = 0x2d
export const point = 0x2e
export const zero = 0x30
