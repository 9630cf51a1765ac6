import { describe, expect, it } from 'vitest';
import { between, moved, stretched } from './part';

const whole = { from_s: 0, to_s: 1000 };

describe('a part of a run', () => {
  it('moves within the whole', () => {
    const part = { from_s: 100, to_s: 200 };
    expect(moved(part, 50, whole)).toEqual({ from_s: 150, to_s: 250 });
    expect(moved(part, -500, whole)).toEqual({ from_s: 0, to_s: 100 });
    expect(moved(part, 5000, whole)).toEqual({ from_s: 900, to_s: 1000 });
  });

  it('keeps the place under the pointer when it is stretched', () => {
    const closer = stretched({ from_s: 100, to_s: 200 }, 0.5, 0.25, whole, 1);
    expect(closer).toEqual({ from_s: 112.5, to_s: 162.5 });
  });

  it('becomes the whole when it would be longer', () => {
    expect(stretched({ from_s: 100, to_s: 900 }, 2, 0.5, whole, 1)).toBeNull();
  });

  it('is never shorter than a few readings', () => {
    const closest = stretched({ from_s: 500, to_s: 502 }, 0.01, 0.5, whole, 1);
    expect(closest).toEqual({ from_s: 500.5, to_s: 501.5 });
    expect(between(500, 500, whole, 10)).toEqual({ from_s: 495, to_s: 505 });
    expect(between(999, 1000, whole, 10)).toEqual({ from_s: 990, to_s: 1000 });
  });

  it('lies between two times, dragged either way', () => {
    expect(between(300, 200, whole, 1)).toEqual({ from_s: 200, to_s: 300 });
    expect(between(-50, 2000, whole, 1)).toBeNull();
  });
});
