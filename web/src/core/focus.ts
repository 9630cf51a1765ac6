import { Fields } from './fields';

/** Widths of both arms' lines while the focus is turned, oldest first; null for one not seen. */
export interface FocusTrace {
  upright_px: (number | null)[];
  level_px: (number | null)[];
  spread_px: (number | null)[];
  best_px: number | null;
  past_best: boolean;
  words: string;
}

export function focusOf(value: unknown): FocusTrace {
  const fields = Fields.of(value, 'the focus');
  return {
    upright_px: fields.numbersOrNull('upright_px'),
    level_px: fields.numbersOrNull('level_px'),
    spread_px: fields.numbersOrNull('spread_px'),
    best_px: fields.numberOrNull('best_px'),
    past_best: fields.flag('past_best'),
    words: fields.text('words'),
  };
}

/** From where to where the trace is drawn: round values about all that is in it, never a point. */
export function rangeOf(values: readonly (number | null)[]): [number, number] {
  const seen = values.filter((value): value is number => value !== null);
  if (seen.length === 0) return [0, 1];
  const [least, most] = [Math.min(...seen), Math.max(...seen)];
  // Noise alone does not fill the height: a twentieth of the width is the least that is shown.
  const pad = Math.max(0, most * 0.05 - (most - least), 1e-3) / 2;
  const [low, high] = [least - pad, most + pad];
  const step = 10 ** Math.floor(Math.log10(high - low));
  return [Math.floor(low / step) * step, Math.ceil(high / step) * step];
}

/** Lines of an SVG path, a new one after each gap; x from 0 to `width`, small values low. */
export function pathOf(
  values: readonly (number | null)[],
  [low, high]: readonly [number, number],
  width: number,
  height: number,
): string {
  let drawing = false;
  return values
    .map((value, i) => {
      if (value === null) {
        drawing = false;
        return '';
      }
      const x = values.length > 1 ? (i / (values.length - 1)) * width : width;
      const y = height * (1 - (value - low) / (high - low));
      const letter = drawing ? 'L' : 'M';
      drawing = true;
      return `${letter}${x.toFixed(1)} ${y.toFixed(1)}`;
    })
    .join('');
}
