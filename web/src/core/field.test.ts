import { describe, expect, it } from 'vitest';
import { Columns } from './columns';
import { fieldPlace, inkOf } from './field';
import { readings } from './samples';

describe('the trail', () => {
  it('has the newest row, gaps, and not more points than can be seen', () => {
    const columns = new Columns(1000);
    for (let n = 0; n < 6000; n++) columns.append(readings([n], 0.01), 1);
    const ink = inkOf(columns, fieldPlace('arcsec', null), 0, 60);
    expect(ink.t_s.at(-1)).toBeCloseTo(59.99, 9);
    expect(ink.t_s.length).toBeLessThanOrEqual(602);
    expect(ink.t_s.length).toBeGreaterThan(300);
  });
});
