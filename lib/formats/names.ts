/** The same path with another ending; the old one goes, so "a/b.jpg" gives "a/b.xml". */
export function withExtension(fileName: string, extension: string): string {
  const safe = safePath(fileName);
  const slash = safe.lastIndexOf("/");
  const dot = safe.lastIndexOf(".");
  return `${dot > slash + 1 ? safe.slice(0, dot) : safe}.${extension}`;
}

/**
 * A path that stays inside the folder it is written to: no root, no drive, no "..", no empty parts, "/" between folders.
 * File names come from other people's files.
 */
export function safePath(fileName: string): string {
  const parts = fileName
    .replaceAll("\\", "/")
    .split("/")
    .filter((part) => part !== "" && part !== "." && part !== "..")

    .map((part) => part.replace(/[\u0000-\u001f<>:"|?*]/g, "_"));
  return parts.length === 0 ? "unnamed" : parts.join("/");
}

/** Gives each path once: a second "a.xml" becomes "a-2.xml". */
export function uniquePaths(): (path: string) => string {
  const taken = new Set<string>();
  return (path) => {
    const dot = path.lastIndexOf(".");
    let candidate = path;
    // Some file systems do not tell "A" from "a".
    for (let n = 2; taken.has(candidate.toLowerCase()); n++)
      candidate = `${path.slice(0, dot)}-${n}${path.slice(dot)}`;
    taken.add(candidate.toLowerCase());
    return candidate;
  };
}
