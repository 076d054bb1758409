/** The known name with the fewest edits, if under half its letters differ (Levenshtein 1966). */
export function nearestName(name: string, known: readonly string[]): string | undefined {
  const distance = (a: string, b: string) => {
    let row = Array.from({ length: b.length + 1 }, (_, j) => j);
    for (let i = 1; i <= a.length; i++) {
      const next = [i];
      for (let j = 1; j <= b.length; j++)
        next.push(
          Math.min(row[j]! + 1, next[j - 1]! + 1, row[j - 1]! + (a[i - 1]!.toLowerCase() === b[j - 1]!.toLowerCase() ? 0 : 1)),
        );
      row = next;
    }
    return row[b.length]!;
  };
  const best = known.map((k) => ({ k, d: distance(name, k) })).sort((p, q) => p.d - q.d)[0];
  return best && best.d <= Math.max(1, name.length / 2) ? best.k : undefined;
}
