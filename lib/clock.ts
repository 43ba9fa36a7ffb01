/** UTC epoch milliseconds. Use cases take the time as an argument; only edges read the clock. */
export function nowMs(): number {
  return Date.now();
}
