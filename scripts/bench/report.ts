export function heading(text: string): void {
  console.log(`\n${text}`)
}

/** One figure: what, value, bar, and how it came about. */
export function row(what: string, value: number, bar: string, remark = ''): void {
  const digits = Number.isInteger(value) ? 0 : Math.abs(value) >= 100 ? 0 : Math.abs(value) >= 1 ? 2 : 4
  console.log(`  ${what.padEnd(58)} ${value.toFixed(digits).padStart(9)}   ${bar.padEnd(8)} ${remark}`)
}
