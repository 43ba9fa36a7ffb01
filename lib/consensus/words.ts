/** "1 person", "3 people". */
export function people(count: number): string {
  return count === 1 ? "1 person" : `${count} people`;
}

/** "2 of 4 people". */
export function peopleOf(count: number, all: number): string {
  return `${count} of ${people(all)}`;
}

/** A share as a person reads it: whole per cents. */
export function percent(share: number): string {
  return `${Math.round(100 * share)} %`;
}
