import { Fields, ProtocolError, wordsOf } from './fields';

/** The states of a source, as the service names them. */
export const STATES = ['opening', 'measuring', 'stalled', 'lost', 'ended', 'failed'] as const;
export type State = (typeof STATES)[number];

export interface Average {
  x_arcsec: number | null;
  y_arcsec: number | null;
  x_se_arcsec: number | null;
  y_se_arcsec: number | null;
  n: number;
  window_s: number;
  statistic: string;
}

/** The newest reading, one row of the stream. */
export interface Newest {
  x_arcsec: number | null;
  y_arcsec: number | null;
  x_sd_arcsec: number | null;
  y_sd_arcsec: number | null;
  x_u_arcsec: number | null;
  y_u_arcsec: number | null;
  /** Combined standard uncertainty of the tilt minus the zero; null while none is set. */
  x_rel_u_arcsec: number | null;
  y_rel_u_arcsec: number | null;
  x_px: number | null;
  y_px: number | null;
  quality: readonly string[];
}

/** Columns of one length, a row for each frame; null where nothing could be measured. */
export interface Readings {
  kind: 'readings';
  seq: number[];
  t_s: number[];
  x_arcsec: (number | null)[];
  y_arcsec: (number | null)[];
  x_sd_arcsec: (number | null)[];
  y_sd_arcsec: (number | null)[];
  x_u_arcsec: (number | null)[];
  y_u_arcsec: (number | null)[];
  x_rel_u_arcsec: (number | null)[];
  y_rel_u_arcsec: (number | null)[];
  x_px: (number | null)[];
  y_px: (number | null)[];
  quality: string[][];
  dropped: number;
  average: Average | null;
}

export interface CalibrationInUse {
  id: string;
  /** What it was called when it was made, else nothing. */
  name: string;
  method: string;
  signs: string;
  focal_length_mm: number | null;
  scale_x_arcsec_per_px: number;
  scale_y_arcsec_per_px: number;
  created_utc: string | null;
  warnings: string[];
  /** Tilts at the picture's corners: top left, top right, bottom right, bottom left. */
  field_arcsec: [number, number][];
}

export interface Zero {
  x_arcsec: number;
  y_arcsec: number;
  x_sd_arcsec: number;
  y_sd_arcsec: number;
  n: number;
  set_utc: string;
}

/** The run being recorded. */
export interface RunNow {
  id: number;
  title: string;
  started_utc: string;
  every_s: number;
  readings: number;
}

export interface Status {
  kind: 'status';
  source: string;
  source_name: string;
  simulated: boolean;
  state: State;
  state_detail: string;
  frames_per_s: number | null;
  frames: number;
  frames_unusable: number;
  missed: number;
  image_width_px: number | null;
  image_height_px: number | null;
  calibration: CalibrationInUse | null;
  zero: Zero | null;
  /** What has changed so that a new zero is due, else nothing. */
  zero_wanted: string;
  /** When the fixed frame in use was taken; null while pictures are measured as they come. */
  prepared_utc: string | null;
  run: RunNow | null;
  session_start_utc: string;
  version: string;
}

export interface SourceEvent {
  kind: 'event';
  t_s: number;
  t_utc: string;
  event: string;
  text: string;
}

export type Message = Readings | Status | SourceEvent;

/** One message of the stream. Throws ProtocolError with a line that says what is wrong. */
export function decode(text: string): Message {
  const parsed = parse(text);
  const kind = Fields.of(parsed, 'a message of the stream').text('kind');
  switch (kind) {
    case 'readings':
      return readingsOf(parsed);
    case 'status':
      return statusOf(parsed);
    case 'event':
      return eventOf(parsed);
    default:
      throw new ProtocolError(`a message of the stream is of the unknown kind "${kind}"`);
  }
}

export function readingsOf(value: unknown): Readings {
  const fields = Fields.of(value, 'readings');
  const readings: Readings = {
    kind: 'readings',
    seq: fields.numbers('seq'),
    t_s: fields.numbers('t_s'),
    x_arcsec: fields.numbersOrNull('x_arcsec'),
    y_arcsec: fields.numbersOrNull('y_arcsec'),
    x_sd_arcsec: fields.numbersOrNull('x_sd_arcsec'),
    y_sd_arcsec: fields.numbersOrNull('y_sd_arcsec'),
    x_u_arcsec: fields.numbersOrNull('x_u_arcsec'),
    y_u_arcsec: fields.numbersOrNull('y_u_arcsec'),
    x_rel_u_arcsec: fields.numbersOrNull('x_rel_u_arcsec'),
    y_rel_u_arcsec: fields.numbersOrNull('y_rel_u_arcsec'),
    x_px: fields.numbersOrNull('x_px'),
    y_px: fields.numbersOrNull('y_px'),
    quality: fields.list('quality').map((words) => wordsOf(words, 'readings: quality')),
    dropped: fields.numberOrNull('dropped') ?? 0,
    average: averageOf(fields.objectOrNull('average')),
  };
  for (const [name, column] of Object.entries(readings)) {
    if (Array.isArray(column) && column.length !== readings.seq.length) {
      throw new ProtocolError(
        `readings: ${name} has ${column.length} rows, seq has ${readings.seq.length}`,
      );
    }
  }
  return readings;
}

/** One reading, as it is answered when asked for. */
export function readingOf(value: unknown): {
  newest: Newest;
  average: Average | null;
  age_s: number | null;
} {
  const fields = Fields.of(value, 'the reading');
  return {
    newest: {
      x_arcsec: fields.numberOrNull('x_arcsec'),
      y_arcsec: fields.numberOrNull('y_arcsec'),
      x_sd_arcsec: fields.numberOrNull('x_sd_arcsec'),
      y_sd_arcsec: fields.numberOrNull('y_sd_arcsec'),
      x_u_arcsec: fields.numberOrNull('x_u_arcsec'),
      y_u_arcsec: fields.numberOrNull('y_u_arcsec'),
      x_rel_u_arcsec: fields.numberOrNull('x_rel_u_arcsec'),
      y_rel_u_arcsec: fields.numberOrNull('y_rel_u_arcsec'),
      x_px: fields.numberOrNull('x_px'),
      y_px: fields.numberOrNull('y_px'),
      quality: fields.words('quality'),
    },
    average: averageOf(fields.objectOrNull('average')),
    age_s: fields.numberOrNull('age_s'),
  };
}

function averageOf(fields: Fields | null): Average | null {
  return (
    fields && {
      x_arcsec: fields.numberOrNull('x_arcsec'),
      y_arcsec: fields.numberOrNull('y_arcsec'),
      x_se_arcsec: fields.numberOrNull('x_se_arcsec'),
      y_se_arcsec: fields.numberOrNull('y_se_arcsec'),
      n: fields.number('n'),
      window_s: fields.number('window_s'),
      statistic: fields.text('statistic'),
    }
  );
}

export function statusOf(value: unknown): Status {
  const fields = Fields.of(value, 'status');
  return {
    kind: 'status',
    source: fields.text('source'),
    source_name: fields.textOrNull('source_name') ?? fields.text('source'),
    simulated: fields.flag('simulated'),
    state: fields.oneOf('state', STATES),
    state_detail: fields.textOrNull('state_detail') ?? '',
    frames_per_s: fields.numberOrNull('frames_per_s'),
    frames: fields.numberOrNull('frames') ?? 0,
    frames_unusable: fields.numberOrNull('frames_unusable') ?? 0,
    missed: fields.numberOrNull('missed') ?? 0,
    image_width_px: fields.numberOrNull('image_width_px'),
    image_height_px: fields.numberOrNull('image_height_px'),
    calibration: calibrationOf(fields.objectOrNull('calibration')),
    zero: zeroOf(fields.objectOrNull('zero')),
    zero_wanted: fields.textOrNull('zero_wanted') ?? '',
    prepared_utc: fields.textOrNull('prepared_utc'),
    run: runNowOf(fields.objectOrNull('run')),
    session_start_utc: fields.text('session_start_utc'),
    version: fields.text('version'),
  };
}

function calibrationOf(fields: Fields | null): CalibrationInUse | null {
  return (
    fields && {
      id: fields.text('id'),
      name: fields.textOrNull('name') ?? '',
      method: fields.text('method'),
      signs: fields.text('signs'),
      focal_length_mm: fields.numberOrNull('focal_length_mm'),
      scale_x_arcsec_per_px: fields.number('scale_x_arcsec_per_px'),
      scale_y_arcsec_per_px: fields.number('scale_y_arcsec_per_px'),
      created_utc: fields.textOrNull('created_utc'),
      warnings: fields.words('warnings'),
      field_arcsec: fields.list('field_arcsec').map(cornerOf),
    }
  );
}

function cornerOf(value: unknown): [number, number] {
  if (Array.isArray(value) && value.length === 2) {
    const [x, y]: unknown[] = value;
    if (typeof x === 'number' && typeof y === 'number') return [x, y];
  }
  throw new ProtocolError('status: calibration: field_arcsec is not a list of pairs of numbers');
}

function zeroOf(fields: Fields | null): Zero | null {
  return (
    fields && {
      x_arcsec: fields.number('x_arcsec'),
      y_arcsec: fields.number('y_arcsec'),
      x_sd_arcsec: fields.numberOrNull('x_sd_arcsec') ?? 0,
      y_sd_arcsec: fields.numberOrNull('y_sd_arcsec') ?? 0,
      n: fields.number('n'),
      set_utc: fields.text('set_utc'),
    }
  );
}

function runNowOf(fields: Fields | null): RunNow | null {
  return (
    fields && {
      id: fields.number('id'),
      title: fields.text('title'),
      started_utc: fields.text('started_utc'),
      every_s: fields.number('every_s'),
      readings: fields.number('readings'),
    }
  );
}

function eventOf(value: unknown): SourceEvent {
  const fields = Fields.of(value, 'event');
  return {
    kind: 'event',
    t_s: fields.number('t_s'),
    t_utc: fields.text('t_utc'),
    event: fields.text('event'),
    text: fields.text('text'),
  };
}

/** One fitted arm; the angle is positive clockwise on screen. */
export interface FittedArm {
  angle_deg: number;
  width_px: number;
  contrast: number;
}

/** The fit of the newest picture, for drawing over it. */
export interface Fit {
  seq: number;
  x_px: number | null;
  y_px: number | null;
  upright: FittedArm | null;
  level: FittedArm | null;
  image_width_px: number;
  image_height_px: number;
  peak: number | null;
  quality: string[];
}

export function fitOf(value: unknown): Fit {
  const fields = Fields.of(value, 'sighting');
  const arm = (part: Fields | null): FittedArm | null =>
    part && {
      angle_deg: part.number('angle_deg'),
      width_px: part.number('width_px'),
      contrast: part.number('contrast'),
    };
  return {
    seq: fields.number('seq'),
    x_px: fields.numberOrNull('x_px'),
    y_px: fields.numberOrNull('y_px'),
    upright: arm(fields.objectOrNull('upright')),
    level: arm(fields.objectOrNull('level')),
    image_width_px: fields.number('image_width_px'),
    image_height_px: fields.number('image_height_px'),
    peak: fields.numberOrNull('peak'),
    quality: fields.words('quality'),
  };
}

function parse(text: string): unknown {
  try {
    return JSON.parse(text) as unknown;
  } catch {
    throw new ProtocolError('a message of the stream is not JSON');
  }
}
