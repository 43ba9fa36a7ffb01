/** Classes of the demo's shore batch. */
export const LITTER = ["bottle", "cap", "rope", "float", "can"] as const;
/** Classes for sets of pictures that should ask for something else. */
export const NATURE = ["shell", "driftwood", "kelp"] as const;
export type ShoreClass = (typeof LITTER)[number] | (typeof NATURE)[number];
