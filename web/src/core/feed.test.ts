import { describe, expect, it } from 'vitest';
import { Columns } from './columns';
import { Feed } from './feed';
import type { Readings } from './protocol';
import { readings } from './samples';

const GAP_S = 0.5;

function range(from: number, to: number): number[] {
  return Array.from({ length: to - from + 1 }, (_, i) => from + i);
}

/** A service that holds rows 0 … last and thins nothing. */
function world(last: () => number): {
  feed: Feed;
  columns: Columns;
  asked: number[];
  changes: string[];
} {
  const columns = new Columns(1e6);
  const asked: number[] = [];
  const changes: string[] = [];
  const recent = (from_seq: number): Promise<Readings> => {
    asked.push(from_seq);
    return Promise.resolve(readings(range(from_seq, last())));
  };
  return {
    feed: new Feed(columns, recent, (change) => changes.push(change)),
    columns,
    asked,
    changes,
  };
}

describe('a feed', () => {
  it('joins the past with the present without a row twice or out of order', async () => {
    const { feed, columns } = world(() => 20);
    feed.opened();
    const caught = feed.sessionIs('a', GAP_S);
    feed.take(readings([19, 20, 21]), GAP_S);
    feed.take(readings([22]), GAP_S);
    expect(columns.length).toBe(0);
    await caught;
    expect(columns.lastSeq).toBe(22);
    expect(columns.t_s).toEqual(range(0, 22).map((n) => n * 0.1));
  });

  it('asks only for what it missed when the same session comes back', async () => {
    let last = 10;
    const { feed, columns, asked } = world(() => last);
    feed.opened();
    await feed.sessionIs('a', GAP_S);
    last = 30;
    feed.opened();
    await feed.sessionIs('a', GAP_S);
    expect(asked[2]).toBe(11);
    expect(columns.lastSeq).toBe(30);
    expect(columns.length).toBe(31);
  });

  it('starts anew with another session, whose time begins again', async () => {
    const { feed, columns, changes } = world(() => 5);
    feed.opened();
    await feed.sessionIs('a', GAP_S);
    feed.opened();
    await feed.sessionIs('b', GAP_S);
    expect(changes).toContain('cleared');
    expect(columns.lastSeq).toBe(5);
    expect(columns.length).toBe(6);
  });

  it('asks once however often the status comes', async () => {
    const { feed, asked } = world(() => 5);
    feed.opened();
    await feed.sessionIs('a', GAP_S);
    const before = asked.length;
    await feed.sessionIs('a', GAP_S);
    expect(asked.length).toBe(before);
  });

  it('goes on from now when the past cannot be had', async () => {
    const columns = new Columns(100);
    const feed = new Feed(
      columns,
      () => Promise.reject(new Error('no')),
      () => {},
    );
    feed.opened();
    const caught = feed.sessionIs('a', GAP_S);
    feed.take(readings([7]), GAP_S);
    await caught;
    expect(columns.lastSeq).toBe(7);
  });
});
