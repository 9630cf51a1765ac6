import { expect, it } from 'vitest';
import { ProtocolError } from './fields';
import { fixedFrameOf, takenWords } from './fixed';

const ANSWER = {
  taken_utc: '2026-05-04T03:02:01.000Z',
  frames: 32,
  image_width_px: 1280,
  image_height_px: 720,
  target_seen: false,
};

it('is read as the service sends it, and nothing else is', () => {
  expect(fixedFrameOf(ANSWER)).toEqual(ANSWER);
  expect(() => fixedFrameOf({ ...ANSWER, frames: 'many' })).toThrow(ProtocolError);
});

it('asks to cover the mirror only where its return may be in it', () => {
  expect(takenWords(fixedFrameOf(ANSWER))).not.toMatch(/cover/);
  expect(takenWords(fixedFrameOf({ ...ANSWER, target_seen: true }))).toMatch(/cover/);
});
