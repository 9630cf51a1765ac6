export type Action =
  | 'zero'
  | 'unzero'
  | 'hold'
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
  | 'settings'
  | 'help';

const ACTIONS: Record<string, Action> = {
  z: 'zero',
  t: 'unzero',
  h: 'hold',
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
  s: 'settings',
  '?': 'help',
};

export const KEYS: { keys: string[]; does: string }[] = [
  { keys: ['Z'], does: 'set zero here' },
  { keys: ['T'], does: 'take zero back' },
  { keys: ['H'], does: 'hold the display, and follow again' },
  { keys: ['U'], does: 'next unit' },
  { keys: ['N'], does: 'day, night, or as the system says' },
  { keys: ['1', '2', '3'], does: 'strip of 30 s, 5 min, 10 min' },
  { keys: ['←', '→'], does: 'move the strip to earlier and later' },
  { keys: ['+', '−'], does: 'stretch the strip, and gather it' },
  { keys: ['End'], does: 'strip back to now' },
  { keys: ['S'], does: 'settings' },
  { keys: ['?'], does: 'this list' },
];

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
