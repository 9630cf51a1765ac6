import { describe, expect, it } from 'vitest';
import { hashOf, placeOf } from './route';

describe('the address', () => {
  it('leads back to where it was made', () => {
    for (const place of [
      { view: 'watch', run_id: null },
      { view: 'runs', run_id: null },
      { view: 'runs', run_id: 12 },
      { view: 'prepare', run_id: null, step: 'focus' },
      { view: 'prepare', run_id: null, step: 'kept' },
    ] as const) {
      expect(placeOf(hashOf(place))).toEqual(place);
    }
  });

  it('is Watch when it says nothing known', () => {
    for (const hash of ['', '#', '#survey', '#runs/x', '#runs/-1', '#runs/1/2', '#prepare/', '#prepare/tea']) {
      expect(placeOf(hash)).toEqual({ view: 'watch', run_id: null });
    }
  });

  it('of Prepare alone is its first step', () => {
    expect(placeOf('#prepare')).toEqual({ view: 'prepare', run_id: null, step: 'focus' });
  });
});
