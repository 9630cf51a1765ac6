import { describe, expect, it } from 'vitest';
import { ProtocolError } from './fields';
import { decode, fitOf, readingOf, statusOf } from './protocol';
import { readings, status } from './samples';

describe('a message of the stream', () => {
  it('is told apart by its kind', () => {
    expect(decode(JSON.stringify(readings([1, 2]))).kind).toBe('readings');
    expect(decode(JSON.stringify(status())).kind).toBe('status');
    const event = {
      kind: 'event',
      t_s: 1.5,
      t_utc: '2026-12-01T09:00:00.000Z',
      event: 'stalled',
      text: 'no picture',
    };
    expect(decode(JSON.stringify(event))).toEqual(event);
  });

  it('keeps null as null', () => {
    const message = decode(JSON.stringify({ ...readings([1]), x_arcsec: [null] }));
    expect(message.kind === 'readings' && message.x_arcsec).toEqual([null]);
  });

  const bad: [string, string, RegExp][] = [
    ['no JSON', '{', /not JSON/],
    ['no object', '[]', /not an object/],
    ['an unknown kind', '{"kind":"song"}', /unknown kind "song"/],
    [
      'columns of two lengths',
      JSON.stringify({ ...readings([1, 2]), t_s: [0] }),
      /t_s has 1 rows, seq has 2/,
    ],
    [
      'words for numbers',
      JSON.stringify({ ...readings([1]), x_px: ['a'] }),
      /x_px is not a number/,
    ],
    ['an unknown state', JSON.stringify({ ...status(), state: 'dozing' }), /state is not one of/],
    [
      'quality that is no list',
      JSON.stringify({ ...readings([1]), quality: ['dim'] }),
      /not a list of words/,
    ],
  ];
  it.each(bad)('is refused with %s', (_, text, line) => {
    expect(() => decode(text)).toThrow(ProtocolError);
    expect(() => decode(text)).toThrow(line);
  });
});

describe('a status', () => {
  it('may lack calibration and zero', () => {
    const read = statusOf({ ...status(), calibration: null, zero: null });
    expect(read.calibration).toBeNull();
    expect(read.zero).toBeNull();
  });

  it('keeps the corners of the field in order', () => {
    expect(statusOf(status()).calibration?.field_arcsec[0]).toEqual([-380, 285]);
  });
});

it('reads the fit of a picture without an image', () => {
  const fit = fitOf({
    seq: 3,
    x_px: null,
    y_px: null,
    upright: null,
    level: null,
    image_width_px: 640,
    image_height_px: 480,
    peak: null,
    quality: ['no_image'],
  });
  expect(fit.x_px).toBeNull();
  expect(fit.quality).toEqual(['no_image']);
});

describe('one reading', () => {
  it('says how old it is, and nothing of it where the service does not', () => {
    const reading = { ...Object.fromEntries(NUMBERS.map((name) => [name, 1])), quality: [] };
    expect(readingOf({ ...reading, average: null, age_s: 12.5 }).age_s).toBe(12.5);
    expect(readingOf({ ...reading, average: null, age_s: null }).age_s).toBeNull();
    expect(() => readingOf({ ...reading, quality: 3, average: null })).toThrow('the reading');
  });
});

const NUMBERS = ['x', 'y'].flatMap((axis) =>
  ['arcsec', 'sd_arcsec', 'u_arcsec', 'px'].map((name) => `${axis}_${name}`),
);
