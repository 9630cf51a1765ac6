import { budgetOf, type AxisBudget } from './budget';
import {
  expectedOf,
  finishedOf,
  progressOf,
  type Expected,
  type Finished,
  type Known,
  type Plan,
  type Progress,
} from './calibrating';
import { keptOf, type KeptCalibration } from './calibrations';
import { Fields, ProtocolError } from './fields';
import { fixedFrameOf, type FixedFrame } from './fixed';
import { focusOf, type FocusTrace } from './focus';
import type { Part } from './part';
import { fitOf, readingOf, readingsOf, type Fit, type Readings } from './protocol';
import {
  runsOf,
  seriesOf,
  wholeRunOf,
  type NewRun,
  type Run,
  type Series,
  type WholeRun,
} from './runs';
import { settingsOf, type Settings } from './settings';
import { signsOf, type Edge, type Signs } from './signs';

/** The service said no; the message is its own line for people. */
export class Refused extends Error {}

async function ask(path: string, init: RequestInit = {}): Promise<Response> {
  let answer: Response;
  try {
    answer = await fetch(path, { cache: 'no-store', signal: AbortSignal.timeout(5000), ...init });
  } catch {
    throw new Refused('the service does not answer');
  }
  if (!answer.ok) throw new Refused(await reason(answer));
  return answer;
}

async function reason(answer: Response): Promise<string> {
  try {
    return Fields.of(await answer.json(), 'the answer').text('detail');
  } catch (error) {
    if (error instanceof ProtocolError || error instanceof SyntaxError) {
      return `the service answered ${answer.status}`;
    }
    throw error;
  }
}

const json = (body: unknown): RequestInit => ({
  headers: { 'content-type': 'application/json' },
  body: JSON.stringify(body),
});

export async function recent(from_seq: number, points: number): Promise<Readings> {
  return readingsOf(await (await ask(`api/recent?from_seq=${from_seq}&points=${points}`)).json());
}

export async function readSettings(): Promise<Settings> {
  return settingsOf(await (await ask('api/settings')).json());
}

export async function writeSettings(part: Partial<Settings>): Promise<Settings> {
  return settingsOf(await (await ask('api/settings', { method: 'PUT', ...json(part) })).json());
}

/** The zero itself comes with the next status. */
export async function setZero(): Promise<void> {
  await ask('api/zero', { method: 'POST' });
}

export async function takeZeroBack(): Promise<void> {
  await ask('api/zero', { method: 'DELETE' });
}

/** The fit of the newest picture. */
export async function fit(): Promise<Fit> {
  return fitOf(await (await ask('api/sighting')).json());
}

export async function picture(): Promise<{ seq: number; blob: Blob }> {
  const answer = await ask('api/frame.jpg');
  return { seq: Number(answer.headers.get('X-Seq') ?? -1), blob: await answer.blob() };
}

/** The newest reading, with the scale in use now. */
export async function newestReading(): Promise<ReturnType<typeof readingOf>> {
  return readingOf(await (await ask('api/reading')).json());
}

export async function runs(): Promise<Run[]> {
  return runsOf(await (await ask('api/runs')).json());
}

export async function wholeRun(id: number): Promise<WholeRun> {
  return wholeRunOf(await (await ask(`api/runs/${id}`)).json());
}

/** At most `points` bins of a part of a run, all of it without one. */
export async function series(id: number, part: Part | null, points: number): Promise<Series> {
  const range = part === null ? '' : `&from_s=${part.from_s}&to_s=${part.to_s}`;
  return seriesOf(await (await ask(`api/runs/${id}/series?points=${points}${range}`)).json());
}

/** The run itself comes with the next status. */
export async function startRun(run: NewRun): Promise<void> {
  await ask('api/runs', { method: 'POST', ...json(run) });
}

export async function stopRun(id: number): Promise<void> {
  await ask(`api/runs/${id}/stop`, { method: 'POST' });
}

export function exportAddress(id: number, format: 'csv' | 'ndjson'): string {
  return `api/runs/${id}/export?format=${format}`;
}

export async function calibrations(): Promise<KeptCalibration[]> {
  return keptOf(await (await ask('api/calibrations')).json());
}

/** Keeps a calibration file, as it is; it is not put to use by that. */
export async function keepCalibration(file: Blob): Promise<KeptCalibration> {
  const init = { method: 'POST', headers: { 'content-type': 'application/json' }, body: file };
  const [kept] = keptOf([await (await ask('api/calibrations', init)).json()]);
  if (kept === undefined) throw new ProtocolError('the service kept nothing');
  return kept;
}

const post = (body: unknown = {}): RequestInit => ({ method: 'POST', ...json(body) });
const DELETE: RequestInit = { method: 'DELETE' };

async function progress(path: string, init: RequestInit = {}): Promise<Progress> {
  return progressOf(await (await ask(`api/calibrating${path}`, init)).json());
}

export const calibrating = {
  now: (): Promise<Progress> => progress(''),
  begin: (plan: Plan): Promise<Progress> => progress('', post(given(plan))),
  take: (known: Known): Promise<Progress> => progress('/points', post(known)),
  undo: (): Promise<Progress> => progress('/points/last', DELETE),
  remove: (number: number): Promise<Progress> => progress(`/points/${number}`, DELETE),
  giveUp: async (): Promise<void> => void (await ask('api/calibrating', DELETE)),
  finish: async (named: {
    name: string;
    conditions: string;
    note: string;
    use: boolean;
  }): Promise<Finished> =>
    finishedOf(await (await ask('api/calibrating/finish', post(named))).json()),
  expected: async (
    plan: Plan,
    meant: { lowest: number; highest: number; points: number },
  ): Promise<Expected> =>
    expectedOf(
      await (await ask('api/calibrating/expected', post({ ...given(plan), ...meant }))).json(),
    ),
};

/** What is not known is left out. */
function given(plan: Plan): Record<string, unknown> {
  return Object.fromEntries(Object.entries(plan).filter(([, value]) => value !== null));
}

async function signsAsked(path: string, init: RequestInit = {}): Promise<Signs> {
  return signsOf(await (await ask(`api/signs${path}`, init)).json());
}

export const signs = {
  now: (): Promise<Signs> => signsAsked(''),
  rest: (): Promise<Signs> => signsAsked('/rest', post()),
  pressed: (edge: Edge): Promise<Signs> => signsAsked('/pressed', post({ edge })),
  foil: (foil: {
    thickness_mm: number;
    thickness_sd_mm: number;
    base_mm: number;
    base_sd_mm: number;
  }): Promise<Signs> => signsAsked('/foil', post(foil)),
  startOver: (): Promise<Signs> => signsAsked('', DELETE),
  keep: async (name: string): Promise<Finished> =>
    finishedOf(await (await ask('api/signs/keep', post({ name }))).json()),
};

export async function focus(): Promise<FocusTrace> {
  return focusOf(await (await ask('api/focus')).json());
}

export async function forgetBest(): Promise<FocusTrace> {
  return focusOf(await (await ask('api/focus/best', DELETE)).json());
}

/** Averages so many frames: it may take a while. */
export async function takeFixedFrame(frames: number): Promise<FixedFrame> {
  const init = { ...post({ frames }), signal: AbortSignal.timeout(60_000) };
  return fixedFrameOf(await (await ask('api/fixed-frame', init)).json());
}

export async function forgetFixedFrame(): Promise<void> {
  await ask('api/fixed-frame', DELETE);
}

export async function opticsChanged(what: string): Promise<void> {
  await ask('api/optics/changed', post({ what }));
}

export async function budget(): Promise<{ x: AxisBudget; y: AxisBudget }> {
  return budgetOf(await (await ask('api/budget')).json());
}
