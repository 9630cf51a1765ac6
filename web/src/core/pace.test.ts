import { expect, it } from 'vitest';
import { Pace } from './pace';

it('paints once however often it is asked, and again when asked again', () => {
  const due: (() => void)[] = [];
  let painted = 0;
  const pace = new Pace(
    () => (painted += 1),
    () => (call) => {
      due.push(call);
      return () => (due.length = 0);
    },
  );
  pace.ask();
  pace.ask();
  expect(due.length).toBe(1);
  due.shift()?.();
  expect(painted).toBe(1);
  pace.ask();
  expect(due.length).toBe(1);
  pace.stop();
  expect(due.length).toBe(0);
  pace.ask();
  due.shift()?.();
  expect(painted).toBe(2);
});
