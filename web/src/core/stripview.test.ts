import { describe, expect, it } from 'vitest';
import { pan, shownPart, zoom } from './stripview';

describe('the view of the strip', () => {
  const past = { oldest_s: 0, newest_s: 1000 };

  it('follows the present until it is moved', () => {
    expect(shownPart({ span_s: 30, end_s: null }, past)).toEqual([970, 1000]);
    const moved = pan({ span_s: 30, end_s: null }, -100, past);
    expect(shownPart(moved, { ...past, newest_s: 1010 })).toEqual([870, 900]);
  });

  it('follows again when it reaches the present', () => {
    expect(pan({ span_s: 30, end_s: 990 }, 20, past).end_s).toBeNull();
  });

  it('does not leave the past there is', () => {
    expect(pan({ span_s: 30, end_s: 100 }, -500, past).end_s).toBe(30);
  });

  it('keeps the place under the pointer when it is stretched', () => {
    const view = { span_s: 100, end_s: 500 };
    const closer = zoom(view, 0.5, 0.25, past);
    const place = (v: { span_s: number; end_s: number | null }): number =>
      (v.end_s ?? 0) - 0.75 * v.span_s;
    expect(place(closer)).toBeCloseTo(place(view), 9);
  });

  it('has bounds', () => {
    expect(zoom({ span_s: 600, end_s: null }, 10, 0.5, past).span_s).toBe(600);
    expect(zoom({ span_s: 1.5, end_s: null }, 0.1, 0.5, past).span_s).toBe(1);
  });
});
