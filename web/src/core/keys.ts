export type Action =
  | 'zero'
  | 'unzero'
  | 'hold'
  | 'run'
  | 'watch'
  | 'prepare'
  | 'runs'
  | 'unit'
  | 'theme'
  | 'strip_30'
  | 'strip_300'
  | 'strip_600'
  | 'earlier'
  | 'later'
  | 'closer'
  | 'wider'
  | 'now'
  | 'whole'
  | 'settings'
  | 'help';

export const ACTIONS: Record<string, Action> = {
  z: 'zero',
  t: 'unzero',
  h: 'hold',
  r: 'run',
  w: 'watch',
  p: 'prepare',
  l: 'runs',
  u: 'unit',
  n: 'theme',
  '1': 'strip_30',
  '2': 'strip_300',
  '3': 'strip_600',
  ArrowLeft: 'earlier',
  ArrowRight: 'later',
  '+': 'closer',
  '-': 'wider',
  End: 'now',
  '0': 'whole',
  s: 'settings',
  '?': 'help',
};

export const KEYS: { keys: string[]; does: string }[] = [
  { keys: ['Z'], does: 'set zero here' },
  { keys: ['T'], does: 'take zero back' },
  { keys: ['H'], does: 'hold the display, and follow again' },
  { keys: ['R'], does: 'start a run, or stop the one being recorded' },
  { keys: ['W'], does: 'to Watch' },
  { keys: ['P'], does: 'to Prepare' },
  { keys: ['L'], does: 'to Runs, the list' },
  { keys: ['U'], does: 'next unit' },
  { keys: ['N'], does: 'day, night, or as the system says' },
  { keys: ['1', '2', '3'], does: 'strip of 30 s, 5 min, 10 min' },
  { keys: ['←', '→'], does: 'strip or run: to earlier and later' },
  { keys: ['+', '−'], does: 'strip or run: stretch it, and gather it' },
  { keys: ['End'], does: 'strip back to now' },
  { keys: ['0'], does: 'the whole run' },
  { keys: ['S'], does: 'settings' },
  { keys: ['?'], does: 'this list' },
];

/** What would happen unseen anywhere but in Watch. */
export const ONLY_IN_WATCH: ReadonlySet<Action> = new Set(['zero', 'unzero', 'hold']);

export interface Press {
  key: string;
  ctrlKey: boolean;
  altKey: boolean;
  metaKey: boolean;
}

/** What a key does; nothing when it belongs to the browser or to a field being filled in. */
export function actionOf(press: Press, typing: boolean): Action | null {
  if (typing || press.ctrlKey || press.altKey || press.metaKey) return null;
  return ACTIONS[press.key.length === 1 ? press.key.toLowerCase() : press.key] ?? null;
}
