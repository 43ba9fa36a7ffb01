import { clsx, type ClassValue } from "clsx";
import { twMerge } from "tailwind-merge";

/** Joins class names; of two Tailwind classes for the same property the later one stays. */
export function cn(...names: ClassValue[]): string {
  return twMerge(clsx(names));
}
