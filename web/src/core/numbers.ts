const MINUS = '−';
const THIN_SPACE = '\u2009';
const EN_DASH = '–';

/**
 * Decimals to print for a value of standard uncertainty `sd`: two significant digits of it
 * (JCGM 100:2008, 7.2.6). `most` where there is no uncertainty to go by.
 */
export function decimalsFor(sd: number | null, most = 4): number {
  if (sd === null || !Number.isFinite(sd) || sd <= 0) return most;
  return Math.min(most, Math.max(0, 1 - Math.floor(Math.log10(sd))));
}

/** As `decimalsFor`, but kept at `now` while the noise only hovers about the change (a third). */
export function decimalsNear(sd: number | null, now: number, most: number): number {
  if (sd === null) return decimalsFor(sd, most);
  const [most_now, least_now] = [decimalsFor(sd / 1.3, most), decimalsFor(sd * 1.3, most)];
  return Math.min(most_now, Math.max(least_now, now));
}

/** The place of the first digit of `u`: -2 for 0.012. Digits right of it are below `u`. */
export function placeOf(u: number | null): number {
  if (u === null || !Number.isFinite(u) || u <= 0) return -Infinity;
  return Math.floor(Math.log10(u));
}

/** With its sign, a true minus and thin spaces between thousands; an en dash for no value. */
export function signed(value: number | null, decimals: number): string {
  if (value === null || !Number.isFinite(value)) return EN_DASH;
  return signOf(value, decimals) + plain(Math.abs(value), decimals);
}

/** Without a sign unless negative. */
export function plain(value: number | null, decimals: number): string {
  if (value === null || !Number.isFinite(value)) return EN_DASH;
  const [whole = '', part] = Math.abs(value).toFixed(decimals).split('.');
  const sign = value < 0 && Number(value.toFixed(decimals)) !== 0 ? MINUS : '';
  return sign + grouped(whole) + (part === undefined ? '' : `.${part}`);
}

/** An uncertainty beside others: two digits, and no more than four decimals. */
export function smallUncertainty(u: number | null): string {
  if (u !== null && u < 0.00005) return u === 0 ? '0' : '< 0.0001';
  return plain(u, decimalsFor(u, 4));
}

/** An uncertainty with its two significant digits. */
export function uncertainty(u: number | null): string {
  return plain(u, decimalsFor(u, 6));
}

/** A sign that does not claim a direction the printed digits do not show. */
function signOf(value: number, decimals: number): string {
  return value < 0 && Number(value.toFixed(decimals)) !== 0 ? MINUS : '+';
}

function grouped(whole: string): string {
  return whole.replace(/\B(?=(\d{3})+$)/g, THIN_SPACE);
}

export interface Slot {
  character: string;
  kind: 'sign' | 'digit' | 'point' | 'empty';
  /** The digit stands below the standard uncertainty. */
  below: boolean;
  /** A thin space is due in front of it. */
  spaced: boolean;
}

/**
 * A number laid out in slots of fixed count, so that one number stands under another and nothing
 * moves when digits come and go: empty slots, the sign, `wholes` digits in all, point, decimals.
 */
export function slotsOf(
  value: number | null,
  wholes: number,
  decimals: number,
  u: number | null,
  withSign = true,
): Slot[] {
  const known = value !== null && Number.isFinite(value);
  const [whole = '', part = ''] = known ? Math.abs(value).toFixed(decimals).split('.') : [EN_DASH];
  const lowest = placeOf(u);
  const slots: Slot[] = [];
  const add = (character: string, kind: Slot['kind'], place: number, spaced = false): void => {
    slots.push({ character, kind, below: place < lowest, spaced });
  };
  const empty = (count: number): void => {
    for (let i = 0; i < count; i++) add('', 'empty', Infinity);
  };
  empty(wholes - whole.length);
  if (withSign) {
    if (known) add(signOf(value, decimals), 'sign', Infinity);
    else empty(1);
  }
  [...whole].forEach((digit, i) => {
    const place = whole.length - 1 - i;
    add(digit, 'digit', place, i > 0 && place % 3 === 2);
  });
  if (decimals > 0) {
    if (known) add('.', 'point', -1);
    else empty(1);
    [...part].forEach((digit, i) => add(digit, 'digit', -1 - i));
    empty(decimals - part.length);
  }
  return slots;
}

/** Digits in front of the point. */
export function wholesOf(value: number | null, decimals: number): number {
  if (value === null || !Number.isFinite(value)) return 1;
  return Math.abs(value).toFixed(decimals).split('.')[0]?.length ?? 1;
}
