import { describe, expect, it } from 'vitest';
import { Columns, type Row } from './columns';
import { readings } from './samples';

const row = (seq: number, t_s: number, x: number | null = 1): Row => ({
  seq,
  t_s,
  x_arcsec: x,
  y_arcsec: x,
  x_px: x,
  y_px: x,
  good: x !== null,
});

describe('columns', () => {
  it('refuse a row that is not newer, by number or by time', () => {
    const columns = new Columns(10);
    expect(columns.push(row(5, 1), 1)).toBe(true);
    expect(columns.push(row(5, 2), 1)).toBe(false);
    expect(columns.push(row(6, 1), 1)).toBe(false);
    expect(columns.length).toBe(1);
  });

  it('leave a gap where nothing was measured for long', () => {
    const columns = new Columns(10);
    columns.push(row(1, 0), 0.5);
    columns.push(row(2, 0.4), 0.5);
    columns.push(row(3, 2), 0.5);
    expect(columns.t_s).toEqual([0, 0.4, 1.2, 2]);
    expect(columns.of('x_arcsec')).toEqual([1, 1, null, 1]);
  });

  it('keep an unmeasured row as null, never NaN', () => {
    const columns = new Columns(10);
    columns.push(row(1, 0, null), 0.5);
    expect(columns.of('y_arcsec')).toEqual([null]);
  });

  it('hold the span asked for and not much more', () => {
    const columns = new Columns(10);
    for (let n = 0; n < 1000; n++) columns.append(readings([n]), 0.5);
    expect(columns.t_s.at(-1)).toBeCloseTo(99.9, 9);
    const held_s = 99.9 - (columns.t_s[0] ?? 0);
    expect(held_s).toBeGreaterThanOrEqual(10 - 1e-9);
    expect(held_s).toBeLessThanOrEqual(11 + 1e-9);
    expect(columns.of('x_arcsec').length).toBe(columns.length);
  });

  it('find the first row at or after a time', () => {
    const columns = new Columns(100);
    columns.append(readings([0, 1, 2, 3, 4]), 1);
    expect(columns.indexAt(0.15)).toBe(2);
    expect(columns.indexAt(-1)).toBe(0);
    expect(columns.indexAt(9)).toBe(5);
  });

  it('take only rows before a given one when told so', () => {
    const columns = new Columns(100);
    expect(columns.append(readings([1, 2, 3, 4]), 1, 3)).toBe(2);
    expect(columns.lastSeq).toBe(2);
  });
});
