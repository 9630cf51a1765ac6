import { Fields } from './fields';

/** The fixed frame in use: what the camera shows with the mirror covered. */
export interface FixedFrame {
  taken_utc: string;
  frames: number;
  image_width_px: number;
  image_height_px: number;
  /** It shows what could be the mirror's return, which then has to be covered. */
  target_seen: boolean;
}

export function fixedFrameOf(value: unknown): FixedFrame {
  const fields = Fields.of(value, 'the fixed frame');
  return {
    taken_utc: fields.text('taken_utc'),
    frames: fields.number('frames'),
    image_width_px: fields.number('image_width_px'),
    image_height_px: fields.number('image_height_px'),
    target_seen: fields.flag('target_seen'),
  };
}

/** What to tell once it is taken. */
export function takenWords(taken: FixedFrame): string {
  const done = `fixed frame taken, the mean of ${taken.frames} pictures`;
  return taken.target_seen
    ? `${done}; it shows what could be the mirror's return: if it is, cover it and take it anew`
    : done;
}
