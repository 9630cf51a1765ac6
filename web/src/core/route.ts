export type View = 'watch' | 'prepare' | 'runs';

/** What there is to prepare, in the order one does it. */
export const STEPS = ['focus', 'scale', 'signs', 'uncertainty', 'kept'] as const;
export type Step = (typeof STEPS)[number];

/** Where the page is: one of its views, in Runs perhaps one of them, in Prepare one of its steps. */
export interface Place {
  view: View;
  run_id: number | null;
  step?: Step;
}

/** From the part of the address behind the page's own; what it does not know is Watch. */
export function placeOf(hash: string): Place {
  const step = /^#prepare(?:\/([a-z]+))?$/.exec(hash);
  if (step !== null) {
    const known = STEPS.find((name) => name === (step[1] ?? STEPS[0]));
    if (known !== undefined) return { view: 'prepare', run_id: null, step: known };
  }
  const found = /^#runs(?:\/(\d{1,15}))?$/.exec(hash);
  if (found === null) return { view: 'watch', run_id: null };
  return { view: 'runs', run_id: found[1] === undefined ? null : Number(found[1]) };
}

export function hashOf(place: Place): string {
  if (place.view === 'watch') return '#watch';
  if (place.view === 'prepare') return `#prepare/${place.step ?? STEPS[0]}`;
  return place.run_id === null ? '#runs' : `#runs/${place.run_id}`;
}
