export type View = 'watch' | 'runs';

/** Where the page is: one of its views, and in Runs perhaps one of them. */
export interface Place {
  view: View;
  run_id: number | null;
}

/** From the part of the address behind the page's own; what it does not know is Watch. */
export function placeOf(hash: string): Place {
  const found = /^#runs(?:\/(\d{1,15}))?$/.exec(hash);
  if (found === null) return { view: 'watch', run_id: null };
  return { view: 'runs', run_id: found[1] === undefined ? null : Number(found[1]) };
}

export function hashOf(place: Place): string {
  if (place.view === 'watch') return '#watch';
  return place.run_id === null ? '#runs' : `#runs/${place.run_id}`;
}
