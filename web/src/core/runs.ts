import { Fields } from './fields';

/** A run as the list shows it; not ended while it is recorded. */
export interface Run {
  id: number;
  title: string;
  note: string;
  source: string;
  started_utc: string;
  ended_utc: string | null;
  ending: string | null;
  every_s: number;
  readings: number;
  duration_s: number;
}

export interface RunCalibration {
  id: string;
  method: string;
  signs: string;
  focal_length_mm: number | null;
}

export interface RunEvent {
  t_s: number;
  t_utc: string;
  event: string;
  text: string;
}

/** A run with what was kept beside its readings. */
export interface WholeRun extends Run {
  calibrations: RunCalibration[];
  events: RunEvent[];
}

/** What is asked for when a run begins; `every_s` 0 keeps every reading, else means over it. */
export interface NewRun {
  title: string;
  note: string;
  every_s: number;
}

/** Ways of keeping that the page offers, in seconds. */
export const KEEP_S = [0, 1, 10, 60] as const;

/** Extremes and means in bins, columns of one length; null where nothing is. */
export interface Series {
  bin_s: number;
  t_s: number[];
  n: number[];
  x_min_arcsec: (number | null)[];
  x_max_arcsec: (number | null)[];
  x_mean_arcsec: (number | null)[];
  y_min_arcsec: (number | null)[];
  y_max_arcsec: (number | null)[];
  y_mean_arcsec: (number | null)[];
}

export function runsOf(value: unknown): Run[] {
  return Fields.listOf(value, 'the list of runs').map(runOf);
}

function runOf(fields: Fields): Run {
  return {
    id: fields.number('id'),
    title: fields.text('title'),
    note: fields.text('note'),
    source: fields.text('source'),
    started_utc: fields.text('started_utc'),
    ended_utc: fields.textOrNull('ended_utc'),
    ending: fields.textOrNull('ending'),
    every_s: fields.number('every_s'),
    readings: fields.number('readings'),
    duration_s: fields.numberOrNull('duration_s') ?? 0,
  };
}

export function wholeRunOf(value: unknown): WholeRun {
  const fields = Fields.of(value, 'the run');
  return {
    ...runOf(fields),
    calibrations: fields.objects('calibrations').map((kept) => {
      const calibration = kept.object('calibration');
      return {
        id: calibration.text('id'),
        method: calibration.text('method'),
        signs: calibration.textOrNull('signs') ?? 'unproven',
        focal_length_mm: calibration.numberOrNull('focal_length_mm'),
      };
    }),
    events: fields.objects('events').map((event) => ({
      t_s: event.numberOrNull('t_s') ?? 0,
      t_utc: event.text('t_utc'),
      event: event.text('event'),
      text: event.text('text'),
    })),
  };
}

export function seriesOf(value: unknown): Series {
  const fields = Fields.of(value, 'the series');
  return {
    bin_s: fields.number('bin_s'),
    t_s: fields.numbers('t_s'),
    n: fields.numbers('n'),
    x_min_arcsec: fields.numbersOrNull('x_min_arcsec'),
    x_max_arcsec: fields.numbersOrNull('x_max_arcsec'),
    x_mean_arcsec: fields.numbersOrNull('x_mean_arcsec'),
    y_min_arcsec: fields.numbersOrNull('y_min_arcsec'),
    y_max_arcsec: fields.numbersOrNull('y_max_arcsec'),
    y_mean_arcsec: fields.numbersOrNull('y_mean_arcsec'),
  };
}

/** A run always has a name. */
export function nameOf(run: { id: number; title: string }): string {
  return run.title === '' ? `run ${run.id}` : run.title;
}

export function keepWords(every_s: number): string {
  return every_s === 0 ? 'every reading' : `means over ${every_s} s`;
}

const BYTES_A_ROW = 95;

/** What a day of it takes: "2.6 million rows, 250 MB a day". */
export function dayWillTake(every_s: number, frames_per_s: number): string {
  const rows = 86_400 * (every_s === 0 ? frames_per_s : Math.min(frames_per_s, 1 / every_s));
  const megabytes = (rows * BYTES_A_ROW) / 1e6;
  return `${roundWords(rows)} rows, ${roundWords(Math.max(0.1, megabytes))} MB a day`;
}

function roundWords(count: number): string {
  const rounded = Number(count.toPrecision(2));
  if (rounded >= 1e6) return `${rounded / 1e6} million`;
  return rounded.toLocaleString('en-GB').replaceAll(',', '\u2009');
}
