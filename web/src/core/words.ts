import type { State } from './protocol';
import type { Mounting } from './settings';

export type Axis = 'x' | 'y';

/** Which edge of the mirror is nearer to the instrument; level when the digits show zero. */
export function direction(axis: Axis, value: number | null): string {
  if (value === null || !Number.isFinite(value)) return '';
  const edge = axis === 'x' ? 'right edge' : 'top edge';
  if (value === 0) return axis === 'x' ? 'sides level' : 'top and bottom level';
  return `${edge} ${value > 0 ? 'nearer' : 'farther'}`;
}

/** How a person says it. */
export function lean(axis: Axis, value: number | null): string {
  if (value === null || !Number.isFinite(value)) return '';
  if (axis === 'y') return value < 0 ? 'top edge leans back' : 'top edge leans forward';
  return value < 0 ? 'right edge swings back' : 'right edge swings forward';
}

const QUALITY: Record<string, string> = {
  no_image: 'no image: tilt the mirror until its return comes into view, give light, sharpen',
  dim: 'dim: the image is faint, give more light or exposure',
  saturated: 'saturated: the arms are cut off at full white, give less light',
  blurred: 'blurred: the image is out of focus',
  astigmatic: 'astigmatic: one arm is sharper than the other',
  vignetted: 'vignetted: the return is cut by the aperture',
  at_edge: 'at the edge: part of the image is outside the picture',
  one_axis: 'one axis: only one arm of the crosshair is seen',
  several_returns:
    'several returns: cover the mirror and take a fixed frame, or nudge it: the return moves',
  damaged: 'damaged: the picture arrived incomplete',
  duplicate: 'duplicate: the camera sent the same picture again',
  settling: 'settling: the picture still changes after a setting',
  unlocked: 'unlocked: the camera still changes exposure by itself',
};

/** A quality word in plain language; an unknown one as it is. */
export function qualityWords(word: string): string {
  return QUALITY[word] ?? word.replaceAll('_', ' ');
}

export type Trouble = 'simulated' | 'opening' | 'stalled' | 'lost' | 'ended' | 'failed' | 'cut_off';

export interface Notice {
  trouble: Trouble;
  title: string;
  text: string;
}

const NOTICES: Record<Exclude<State, 'measuring'>, [string, string]> = {
  opening: ['OPENING', 'the source is being opened; no reading yet'],
  stalled: [
    'STALLED',
    'the source is open but sends no picture; the last reading is shown struck out',
  ],
  lost: ['SOURCE LOST', 'the camera is gone; it is being opened again'],
  ended: ['ENDED', 'the last picture has been read; the last reading is shown struck out'],
  failed: ['CANNOT OPEN', 'the source needs you'],
};

/** Every notice that is due, the gravest first. */
export function noticesOf(
  connected: boolean,
  state: State | null,
  detail: string,
  simulated: boolean,
): Notice[] {
  const notices: Notice[] = [];
  if (!connected) {
    notices.push({
      trouble: 'cut_off',
      title: 'PAGE CUT OFF',
      text: 'this page gets nothing from the service; it tries again by itself',
    });
  } else if (state !== null && state !== 'measuring') {
    const [title, text] = NOTICES[state];
    notices.push({ trouble: state, title, text: detail === '' ? text : detail });
  }
  if (simulated) {
    notices.push({
      trouble: 'simulated',
      title: 'SIMULATED',
      text: 'no camera is connected; these angles are invented',
    });
  }
  return notices;
}

export const MOUNTING_WORDS: Record<Mounting, string> = {
  straight: 'upright, nothing between objective and sensor',
  swapped_sides: 'left and right exchanged (one beam splitter beside the axis)',
  upside_down: 'top and bottom exchanged (one beam splitter above or below)',
  half_turn: 'both exchanged (through an eyepiece, or the camera upside down)',
};

/** "4 s", "3 min", "2 h": how long ago. */
export function age(age_s: number): string {
  if (age_s < 9.95) return `${age_s.toFixed(1)} s`;
  if (age_s < 120) return `${Math.round(age_s)} s`;
  if (age_s < 7200) return `${Math.round(age_s / 60)} min`;
  return `${Math.round(age_s / 3600)} h`;
}
