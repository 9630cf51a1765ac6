import { Fields, ProtocolError } from './fields';
import { fitOf, readingsOf, type Fit, type Readings } from './protocol';
import { settingsOf, type Settings } from './settings';

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
