import { describe, expect, it } from 'vitest';
import { Places } from './places';
import { NOTHING, type AxisShown } from './shown';

const axis = (value: number, noise: number): AxisShown => ({ value, noise, u: noise });

describe('places', () => {
  it('are the same for both, enough for the larger and for the finer', () => {
    expect(new Places().next([axis(1234, 0.5), axis(-2, 0.002)], 0)).toEqual({
      wholes: 4,
      decimals: 4,
    });
  });

  it('do not flicker with the noise', () => {
    const places = new Places();
    places.next([axis(1, 0.012)], 0);
    for (let t_s = 0.1; t_s < 20; t_s += 0.1) {
      const noise = 0.01 * (1 + 0.25 * Math.sin(7 * t_s));
      expect(places.next([axis(1, noise)], t_s).decimals).toBe(3);
    }
  });

  it('grow at once in front of the point, follow the noise after a while behind it', () => {
    const places = new Places();
    places.next([axis(9, 0.02)], 0);
    expect(places.next([axis(10, 0.02)], 0.1).wholes).toBe(2);
    expect(places.next([axis(10, 0.5)], 1).decimals).toBe(3);
    expect(places.next([axis(10, 0.5)], 6).decimals).toBe(2);
  });

  it('stay where they are while there is no value', () => {
    const places = new Places();
    const before = places.next([axis(123, 0.02)], 0);
    expect(places.next([NOTHING, NOTHING], 1)).toEqual(before);
  });
});
