import { describe, expect, it } from 'vitest';
import { STATES } from './protocol';
import { age, direction, lean, noticesOf, qualityWords } from './words';

describe('directions', () => {
  // The axes of the project: X > 0 right edge nearer to the instrument, Y > 0 top edge nearer.
  it('say which edge is nearer', () => {
    expect(direction('x', 3)).toBe('right edge nearer');
    expect(direction('x', -3)).toBe('right edge farther');
    expect(direction('y', 3)).toBe('top edge nearer');
    expect(direction('y', -3)).toBe('top edge farther');
  });

  it('say nothing of a direction where there is none', () => {
    expect(direction('x', 0)).not.toMatch(/nearer|farther/);
    expect(direction('y', null)).toBe('');
    expect(lean('y', Number.NaN)).toBe('');
  });

  it('agree with how a person says it', () => {
    expect(lean('y', -3)).toContain('back');
    expect(lean('y', 3)).toContain('forward');
    expect(lean('x', -3)).toContain('back');
    expect(lean('x', 3)).toContain('forward');
  });
});

it('has plain words for every quality word of the contract', () => {
  const contract =
    'no_image dim saturated blurred astigmatic vignetted at_edge one_axis several_returns damaged duplicate settling unlocked';
  for (const word of contract.split(' '))
    expect(qualityWords(word).length).toBeGreaterThan(word.length + 5);
  expect(qualityWords('some_new_word')).toBe('some new word');
  expect(qualityWords('no_image')).toMatch(/tilt the mirror/);
  expect(qualityWords('several_returns')).toMatch(/cover the mirror.*fixed frame.*nudge/);
});

describe('notices', () => {
  it('are absent only for a real source that measures', () => {
    for (const state of STATES) {
      expect(noticesOf(true, state, '', false).length).toBe(state === 'measuring' ? 0 : 1);
    }
  });

  it('differ in words from each other', () => {
    const titles = STATES.flatMap((state) => noticesOf(true, state, '', false)).map(
      (notice) => notice.title,
    );
    titles.push(...noticesOf(false, null, '', true).map((notice) => notice.title));
    expect(new Set(titles).size).toBe(titles.length);
    expect(titles.length).toBe(7);
  });

  it('say what the service says about the state', () => {
    expect(noticesOf(true, 'failed', 'there is no camera 7', false)[0]?.text).toBe(
      'there is no camera 7',
    );
  });

  it('do not trust the last state heard once the page is cut off', () => {
    expect(noticesOf(false, 'stalled', '', true).map((notice) => notice.trouble)).toEqual([
      'cut_off',
      'simulated',
    ]);
  });
});

it('tells ages in the unit that fits', () => {
  expect([0.4, 12, 150, 9000].map(age)).toEqual(['0.4 s', '12 s', '3 min', '3 h']);
});
