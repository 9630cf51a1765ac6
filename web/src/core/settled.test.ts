import { expect, it } from 'vitest';
import { Settled } from './settled';

it('settles slowly', () => {
  const settled = new Settled(3, 1, 5);
  expect(settled.next(4, 0)).toBe(3);
  expect(settled.next(4, 1)).toBe(4);
  expect(settled.next(3, 2)).toBe(4);
  expect(settled.next(4, 4)).toBe(4);
  expect(settled.next(3, 6)).toBe(4);
  expect(settled.next(3, 11)).toBe(3);
});
