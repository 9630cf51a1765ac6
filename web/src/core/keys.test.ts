import { describe, expect, it } from 'vitest';
import { actionOf } from './keys';

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
