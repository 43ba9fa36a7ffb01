export type DiffPart = { kind: "same" | "added" | "removed"; text: string };

/** Words beyond which the middle is shown as replaced: the table of a longer pair would not be worth its memory. */
const CELLS_MAX = 4_000_000;

const wordsOf = (text: string) => text.match(/\s+|[^\s]+/g) ?? [];

/**
 * What changed from one text to another, word by word, white space kept: the parts in order, "removed" before
 * "added" where both stand at one place. Joining same and removed gives `before`, same and added gives `after`.
 * Longest common subsequence after equal ends are cut off; O(n m) in the words between. Pure.
 */
export function wordDiff(before: string, after: string): DiffPart[] {
  const [a, b] = [wordsOf(before), wordsOf(after)];
  let head = 0;
  while (head < a.length && head < b.length && a[head] === b[head]) head++;
  let tail = 0;
  while (
    tail < a.length - head &&
    tail < b.length - head &&
    a[a.length - 1 - tail] === b[b.length - 1 - tail]
  )
    tail++;
  const parts: DiffPart[] = [];
  const push = (kind: DiffPart["kind"], words: readonly string[]) => {
    if (words.length === 0) return;
    const last = parts.at(-1);
    if (last?.kind === kind) last.text += words.join("");
    else parts.push({ kind, text: words.join("") });
  };
  push("same", a.slice(0, head));
  for (const part of middle(a.slice(head, a.length - tail), b.slice(head, b.length - tail)))
    push(part.kind, [part.text]);
  push("same", a.slice(a.length - tail));
  return parts;
}

function middle(a: readonly string[], b: readonly string[]): DiffPart[] {
  if (a.length * b.length > CELLS_MAX || a.length === 0 || b.length === 0) {
    return [
      ...(a.length > 0 ? [{ kind: "removed" as const, text: a.join("") }] : []),
      ...(b.length > 0 ? [{ kind: "added" as const, text: b.join("") }] : []),
    ];
  }
  // lengths[i][j]: the longest common subsequence of a from i on and b from j on.
  const width = b.length + 1;
  const lengths = new Int32Array((a.length + 1) * width);
  const at = (i: number, j: number) => lengths[i * width + j] ?? 0;
  for (let i = a.length - 1; i >= 0; i--)
    for (let j = b.length - 1; j >= 0; j--)
      lengths[i * width + j] = a[i] === b[j] ? at(i + 1, j + 1) + 1 : Math.max(at(i + 1, j), at(i, j + 1));
  const parts: DiffPart[] = [];
  let [i, j] = [0, 0];
  while (i < a.length || j < b.length) {
    if (i < a.length && j < b.length && a[i] === b[j]) {
      parts.push({ kind: "same", text: a[i] ?? "" });
      i++;
      j++;
    } else if (i < a.length && (j === b.length || at(i + 1, j) >= at(i, j + 1))) {
      parts.push({ kind: "removed", text: a[i] ?? "" });
      i++;
    } else {
      parts.push({ kind: "added", text: b[j] ?? "" });
      j++;
    }
  }
  return parts;
}
