/** A part of a run that is looked at, in seconds since its start. */
export interface Part {
  from_s: number;
  to_s: number;
}

/** Moved by so much, but not out of the whole. */
export function moved(part: Part, by_s: number, whole: Part): Part {
  const span_s = part.to_s - part.from_s;
  const from_s = Math.max(whole.from_s, Math.min(part.from_s + by_s, whole.to_s - span_s));
  return { from_s, to_s: from_s + span_s };
}

/**
 * Longer for a factor above 1, the place at `share` of the width (0 left, 1 right) kept still; null
 * when that is the whole.
 */
export function stretched(
  part: Part,
  factor: number,
  share: number,
  whole: Part,
  shortest_s: number,
): Part | null {
  const long_s = part.to_s - part.from_s;
  const span_s = Math.max(shortest_s, long_s * factor);
  if (span_s >= whole.to_s - whole.from_s) return null;
  const from_s = part.from_s + share * (long_s - span_s);
  return moved({ from_s, to_s: from_s + span_s }, 0, whole);
}

/** What lies between two times, whichever comes first; not shorter than that. */
export function between(
  a_s: number,
  b_s: number,
  whole: Part,
  shortest_s: number,
): Part | null {
  const part = { from_s: Math.min(a_s, b_s), to_s: Math.max(a_s, b_s) };
  const factor = Math.max(1, shortest_s / Math.max(part.to_s - part.from_s, 1e-9));
  return stretched(part, factor, 0.5, whole, shortest_s);
}
