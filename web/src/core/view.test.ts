import { describe, expect, it } from 'vitest';
import { armEnds } from './arms';
import { Columns } from './columns';
import { fieldPlace, inkOf } from './field';
import { actionOf } from './keys';
import { agoWords, LaneMaker, LANES_TOP, timeMarks } from './lanes';
import { drawMirror, exaggeration, type Point } from './mirror';
import { readings } from './samples';
import { Settled } from './settled';
import { spreadOf } from './statistics';
import { pan, shownPart, zoom } from './stripview';
import { ARCSEC_PER_RAD } from './units';
import { extentOf, Windows } from './windows';

const TEN_DEG = (10 / 180) * Math.PI * ARCSEC_PER_RAD;

describe('the drawing of the mirror', () => {
  const heights = (x: number, y: number): { left: number; right: number; top: number; bottom: number } => {
    const { front } = drawMirror(x, y);
    const at = (i: number): Point => front[i] ?? [Number.NaN, Number.NaN];
    const [tl, tr, br, bl] = [at(0), at(1), at(2), at(3)];
    const length = (a: Point, b: Point): number => Math.hypot(a[0] - b[0], a[1] - b[1]);
    return { left: length(tl, bl), right: length(tr, br), top: length(tl, tr), bottom: length(bl, br) };
  };

  // The axes of the project; in perspective what is nearer is larger.
  it('shows the right edge larger for X > 0 and the top edge larger for Y > 0', () => {
    const turned = heights(TEN_DEG, 0);
    expect(turned.right).toBeGreaterThan(turned.left * 1.05);
    expect(turned.top).toBeCloseTo(turned.bottom, 12);
    const leaning = heights(0, TEN_DEG);
    expect(leaning.top).toBeGreaterThan(leaning.bottom * 1.05);
    expect(leaning.left).toBeCloseTo(leaning.right, 12);
  });

  it('is a square of half side 1 without tilt', () => {
    expect(heights(0, 0)).toEqual({ left: 2, right: 2, top: 2, bottom: 2 });
  });

  it('is exaggerated by a round factor', () => {
    expect([1, 2, 5, 20, 500].map(exaggeration)).toEqual([100_000, 50_000, 20_000, 5_000, 200]);
  });
});

// Angles positive clockwise on screen: upright arm along (-sin a, cos a), level along (cos a, sin a).
it('draws the arms through the crossing at their angles', () => {
  const { upright, level } = armEnds({ x: 100, y: 50 }, 30, 90, 10);
  const numbers = (d: string | null): number[] => (d ?? '').split(/[ML ]/).filter(Boolean).map(Number);
  const [x0 = 0, y0 = 0, x1 = 0, y1 = 0] = numbers(upright);
  expect([(x0 + x1) / 2, (y0 + y1) / 2]).toEqual([100, 50]);
  expect(x1 - 100).toBeCloseTo(-10 * Math.sin(Math.PI / 6), 9);
  expect(y1 - 50).toBeCloseTo(10 * Math.cos(Math.PI / 6), 9);
  expect(numbers(level)[2]).toBeCloseTo(100, 9);
  expect(armEnds({ x: 0, y: 0 }, null, 1, 10).upright).toBeNull();
});

describe('windows', () => {
  it('hold what they are given, at one scale', () => {
    const windows = new Windows([4 / 3, 1]);
    const frame = windows.next([[3, 5], [-9, -8]], 0.1, 0);
    expect(frame.low[0]).toBeLessThanOrEqual(3);
    expect((frame.low[0] ?? 0) + (frame.span * 4) / 3).toBeGreaterThanOrEqual(5);
    expect(frame.low[1]).toBeLessThanOrEqual(-9);
    expect((frame.low[1] ?? 0) + frame.span).toBeGreaterThanOrEqual(-8);
  });

  it('stand still while what they hold moves inside', () => {
    const windows = new Windows([1]);
    const first = windows.next([[0, 1]], 0.1, 0);
    expect(windows.next([[0.05, 1.05]], 0.1, 1)).toEqual(first);
  });

  it('open at once and close after a while', () => {
    const windows = new Windows([1], 4);
    const small = windows.next([[0, 1]], 0.1, 0).span;
    const large = windows.next([[0, 10]], 0.1, 1).span;
    expect(large).toBeGreaterThan(10);
    expect(windows.next([[0, 1]], 0.1, 2).span).toBe(large);
    expect(windows.next([[0, 1]], 0.1, 6.1).span).toBeLessThan(2 * small);
  });

  it('never show less than asked for', () => {
    expect(new Windows([1]).next([[1, 1]], 0.5, 0).span).toBeGreaterThanOrEqual(0.5);
    expect(extentOf([null, null])).toBeNull();
  });
});

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
    const place = (v: { span_s: number; end_s: number | null }): number => (v.end_s ?? 0) - 0.75 * v.span_s;
    expect(place(closer)).toBeCloseTo(place(view), 9);
  });

  it('has bounds', () => {
    expect(zoom({ span_s: 600, end_s: null }, 10, 0.5, past).span_s).toBe(600);
    expect(zoom({ span_s: 1.5, end_s: null }, 0.1, 0.5, past).span_s).toBe(1);
  });
});

describe('lanes', () => {
  const place = fieldPlace('arcsec', null);

  it('keep X above Y and inside the strip, and null as null', () => {
    const columns = new Columns(100);
    columns.append(readings([1, 2, 3, 4, 5, 6]), 1);
    columns.push({ seq: 7, t_s: 0.7, x_arcsec: null, y_arcsec: null, x_px: null, y_px: null, good: false }, 1);
    const { data } = new LaneMaker().make(columns, place, 0, 1, 0.01, 1);
    const [, xs, ys] = data;
    expect(xs.at(-1)).toBeNull();
    for (let i = 0; i < 6; i++) {
      expect(xs[i]).toBeGreaterThan(1);
      expect(xs[i]).toBeLessThan(LANES_TOP);
      expect(ys[i]).toBeGreaterThan(0);
      expect(ys[i]).toBeLessThan(1);
    }
    expect((xs[1] ?? 0) - (xs[0] ?? 0)).toBeCloseTo((ys[0] ?? 0) - (ys[1] ?? 0), 9);
  });

  it('names each stretch without a reading, also an open one at the end', () => {
    const columns = new Columns(100);
    columns.append(readings([1, 2]), 0.5);
    columns.append(readings([40, 41]), 0.5);
    const { gaps } = new LaneMaker().make(columns, place, 0, 9.1, 0.01, 9.1);
    expect(gaps).toEqual([[0.2, 4], [4.1000000000000005, 9.1]]);
  });

  it('count time back from now while following, and by round times of the clock else', () => {
    const following = timeMarks(100.3, 130.3, 6, true);
    expect(following.map((mark) => agoWords(mark.ago_s, 30, 'now'))).toEqual(
      ['−30 s', '−25 s', '−20 s', '−15 s', '−10 s', '−5 s', 'now'],
    );
    expect(timeMarks(100.3, 130.3, 6, false).map((mark) => mark.at_s)).toEqual([105, 110, 115, 120, 125, 130]);
    expect(agoWords(240, 600, 'now')).toBe('−4 min');
  });
});

describe('the trail', () => {
  it('has the newest row, gaps, and not more points than can be seen', () => {
    const columns = new Columns(1000);
    for (let n = 0; n < 6000; n++) columns.append(readings([n], 0.01), 1);
    const ink = inkOf(columns, fieldPlace('arcsec', null), 0, 60);
    expect(ink.t_s.at(-1)).toBeCloseTo(59.99, 9);
    expect(ink.t_s.length).toBeLessThanOrEqual(602);
    expect(ink.t_s.length).toBeGreaterThan(300);
  });
});

describe('keys', () => {
  const press = { key: 'z', ctrlKey: false, altKey: false, metaKey: false };

  it('act, in either case of the letter', () => {
    expect(actionOf(press, false)).toBe('zero');
    expect(actionOf({ ...press, key: 'Z' }, false)).toBe('zero');
  });

  it('leave typing and the browser alone', () => {
    expect(actionOf(press, true)).toBeNull();
    expect(actionOf({ ...press, ctrlKey: true }, false)).toBeNull();
    expect(actionOf({ ...press, key: 'F5' }, false)).toBeNull();
  });
});

it('settles slowly', () => {
  const settled = new Settled(3, 1, 5);
  expect(settled.next(4, 0)).toBe(3);
  expect(settled.next(4, 1)).toBe(4);
  expect(settled.next(3, 2)).toBe(4);
  expect(settled.next(4, 4)).toBe(4);
  expect(settled.next(3, 6)).toBe(4);
  expect(settled.next(3, 11)).toBe(3);
});

it('has mean and scatter without loss of digits far from zero', () => {
  // Values 1e9 + {4, 7, 13, 16}: mean 1e9 + 10, sample variance 30 (a classic of numerical
  // analysis, from memory; exact by hand: (36 + 9 + 9 + 36) / 3 = 30).
  const spread = spreadOf([4, 7, null, 13, 16].map((v) => (v === null ? null : 1e9 + v)));
  expect(spread).toEqual({ n: 4, mean: 1e9 + 10, sd: Math.sqrt(30) });
  expect(spreadOf([1])).toBeNull();
});
