import { describe, expect, it } from 'vitest';
import { SettingsKeeper } from './keeper';
import { FIRST_SETTINGS, type Settings } from './settings';

/** A service whose answers come when the test lets them. */
function bench() {
  let held: Settings = FIRST_SETTINGS;
  let shown: Settings = FIRST_SETTINGS;
  let readings = 0;
  const answers: (() => void)[] = [];
  const later = <T>(answer: T): Promise<T> =>
    new Promise((resolve) => answers.push(() => resolve(answer)));
  const keeper = new SettingsKeeper(
    () => {
      readings += 1;
      return later(held);
    },
    (part) => {
      held = { ...held, ...part };
      return later(held);
    },
    () => shown,
    (settings) => (shown = settings),
  );
  return {
    keeper,
    shown: () => shown,
    readings: () => readings,
    elsewhere: (part: Partial<Settings>) => (held = { ...held, ...part }),
    answer: async () => {
      answers.shift()?.();
      await new Promise((resolve) => setTimeout(resolve));
    },
  };
}

describe('settings', () => {
  it('changed elsewhere are shown', async () => {
    const { keeper, shown, elsewhere, answer } = bench();
    elsewhere({ unit: 'urad' });
    void keeper.refresh();
    await answer();
    expect(shown().unit).toBe('urad');
  });

  it('are read once more, not once each, for several calls', async () => {
    const { keeper, readings, answer } = bench();
    for (let i = 0; i < 5; i++) void keeper.refresh();
    await answer();
    await answer();
    await answer();
    expect(readings()).toBe(2);
  });

  it('wished for are shown at once and survive an older answer', async () => {
    const { keeper, shown, elsewhere, answer } = bench();
    elsewhere({ average_s: 5 });
    void keeper.refresh();
    void keeper.change({ unit: 'urad' });
    expect(shown().unit).toBe('urad');
    await answer(); // the reading asked for before the wish: it knows nothing of it
    expect(shown().unit).toBe('urad');
    await answer(); // the wish
    await answer(); // the reading made up for
    expect(shown()).toMatchObject({ unit: 'urad', average_s: 5 });
  });

  it('wished for twice end as the last wish', async () => {
    const { keeper, shown, answer } = bench();
    void keeper.change({ unit: 'urad' });
    void keeper.change({ unit: 'mm/m' });
    await answer();
    expect(shown().unit).toBe('mm/m');
    await answer();
    await answer();
    expect(shown().unit).toBe('mm/m');
  });

  it('refused stand as they were', async () => {
    let shown: Settings = FIRST_SETTINGS;
    const keeper = new SettingsKeeper(
      () => Promise.resolve(FIRST_SETTINGS),
      () => Promise.reject(new Error('no')),
      () => shown,
      (settings) => (shown = settings),
    );
    await expect(keeper.change({ unit: 'urad' })).rejects.toThrow('no');
    expect(shown.unit).toBe('arcsec');
  });
});
