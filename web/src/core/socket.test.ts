import { beforeEach, describe, expect, it } from 'vitest';
import { Connection, type Socket, type World } from './socket';

class FakeSocket implements Socket {
  onopen: (() => void) | null = null;
  onmessage: ((event: { data: unknown }) => void) | null = null;
  onclose: (() => void) | null = null;
  closed = false;
  close(): void {
    this.closed = true;
  }
}

/** Time that only moves when it is told to. */
class FakeWorld implements World {
  sockets: FakeSocket[] = [];
  opened_ms: number[] = [];
  now_ms = 0;
  private timers: { at_ms: number; call: () => void }[] = [];

  open(): Socket {
    this.opened_ms.push(this.now_ms);
    this.sockets.push(new FakeSocket());
    return this.newest;
  }

  after(wait_ms: number, call: () => void): () => void {
    const timer = { at_ms: this.now_ms + wait_ms, call };
    this.timers.push(timer);
    return () => (this.timers = this.timers.filter((other) => other !== timer));
  }

  advance(by_ms: number): void {
    const end_ms = this.now_ms + by_ms;
    for (;;) {
      const due = this.timers
        .filter((timer) => timer.at_ms <= end_ms)
        .sort((a, b) => a.at_ms - b.at_ms)[0];
      if (!due) break;
      this.timers = this.timers.filter((timer) => timer !== due);
      this.now_ms = due.at_ms;
      due.call();
    }
    this.now_ms = end_ms;
  }

  get newest(): FakeSocket {
    const socket = this.sockets.at(-1);
    if (!socket) throw new Error('nothing was opened');
    return socket;
  }
}

describe('a connection', () => {
  let world: FakeWorld;
  let heard: string[];
  let connection: Connection;

  beforeEach(() => {
    world = new FakeWorld();
    heard = [];
    connection = new Connection(
      'ws://127.0.0.1/api/stream',
      {
        onOpen: () => heard.push('open'),
        onText: (text) => heard.push(text),
        onDown: () => heard.push('down'),
      },
      world,
    );
  });

  it('passes on what it hears', () => {
    world.newest.onopen?.();
    world.newest.onmessage?.({ data: 'hello' });
    expect(heard).toEqual(['open', 'hello']);
  });

  it('tries again with growing waits, up to a bound', () => {
    const waits = [];
    for (let i = 0; i < 8; i++) {
      const closed_ms = world.now_ms;
      const count = world.sockets.length;
      world.newest.onclose?.();
      while (world.sockets.length === count) world.advance(50);
      waits.push(world.now_ms - closed_ms);
    }
    expect(waits).toEqual([250, 500, 1000, 2000, 4000, 4000, 4000, 4000]);
  });

  it('begins with short waits again after it has heard something', () => {
    for (let i = 0; i < 5; i++) {
      world.newest.onclose?.();
      world.advance(4000);
    }
    world.newest.onopen?.();
    world.newest.onmessage?.({ data: 'x' });
    const count = world.sockets.length;
    world.newest.onclose?.();
    world.advance(250);
    expect(world.sockets.length).toBe(count + 1);
  });

  it('takes silence for a dead line, and lets the socket go', () => {
    world.newest.onopen?.();
    const first = world.newest;
    world.advance(3499);
    expect(heard).toEqual(['open']);
    world.advance(1);
    expect(heard).toEqual(['open', 'down']);
    expect(first.closed).toBe(true);
  });

  it('stays open while it hears something now and then', () => {
    world.newest.onopen?.();
    for (let i = 0; i < 10; i++) {
      world.advance(1000);
      world.newest.onmessage?.({ data: 'still here' });
    }
    expect(world.sockets.length).toBe(1);
    expect(heard).not.toContain('down');
  });

  it('hears nothing of a socket it has let go', () => {
    const first = world.newest;
    const late = first.onmessage;
    first.onclose?.();
    world.advance(250);
    expect(first.onmessage).toBeNull();
    expect(late).not.toBeNull();
  });

  it('is quiet once stopped', () => {
    connection.stop();
    expect(world.newest.closed).toBe(true);
    world.advance(60_000);
    expect(world.sockets.length).toBe(1);
    expect(heard).toEqual([]);
  });
});
