import { describe, expect, it } from 'vitest';
import { ACTIONS, actionOf, KEYS } from './keys';

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

  it('are all in the list that explains them', () => {
    const names: Record<string, string> = { '←': 'ArrowLeft', '→': 'ArrowRight', '−': '-' };
    const explained = KEYS.flatMap(({ keys }) => keys).map((key) => names[key] ?? key);
    for (const key of explained) expect(actionOf({ ...press, key }, false), key).not.toBeNull();
    const actions = new Set(explained.map((key) => actionOf({ ...press, key }, false)));
    expect(actions.size).toBe(new Set(Object.values(ACTIONS)).size);
  });
});
