/** What part of the past the strip shows: a length, and its end, or null to follow the present. */
export interface StripView {
  span_s: number;
  end_s: number | null;
}

export interface Past {
  oldest_s: number;
  newest_s: number;
}

export const SPANS_S = [30, 300, 600] as const;
const SHORTEST_S = 1;
const LONGEST_S = 600;

export function shownPart(view: StripView, past: Past): [from_s: number, to_s: number] {
  const end_s = view.end_s ?? past.newest_s;
  return [end_s - view.span_s, end_s];
}

/** Moves towards the past for a negative `by_s`; reaching the present follows it again. */
export function pan(view: StripView, by_s: number, past: Past): StripView {
  const end_s = (view.end_s ?? past.newest_s) + by_s;
  if (end_s >= past.newest_s) return { ...view, end_s: null };
  const first_s = Math.min(past.oldest_s + view.span_s, past.newest_s);
  return { ...view, end_s: Math.max(end_s, first_s) };
}

/** Longer for a factor above 1, the place at `share` of the width (0 left, 1 right) kept still. */
export function zoom(view: StripView, factor: number, share: number, past: Past): StripView {
  const span_s = Math.min(LONGEST_S, Math.max(SHORTEST_S, view.span_s * factor));
  if (view.end_s === null) return { span_s, end_s: null };
  const still_s = view.end_s - (1 - share) * view.span_s;
  return pan({ span_s, end_s: still_s + (1 - share) * span_s }, 0, past);
}
