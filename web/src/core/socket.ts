/** The part of a WebSocket this page uses. */
export interface Socket {
  onopen: (() => void) | null;
  onmessage: ((event: { data: unknown }) => void) | null;
  onclose: (() => void) | null;
  close(): void;
}

/** What a connection needs of the world; a test gives its own. */
export interface World {
  open(url: string): Socket;
  /** Calls once after `wait_ms`; answers a function that takes it back. */
  after(wait_ms: number, call: () => void): () => void;
}

export interface Listener {
  onOpen(): void;
  onText(text: string): void;
  onDown(): void;
}

const FIRST_WAIT_MS = 250;
const LONGEST_WAIT_MS = 4000;
/** The service says something every second; silence for this long means the line is dead. */
const SILENCE_MS = 3500;

/** A WebSocket that opens itself again, with growing waits, until it is stopped. */
export class Connection {
  private socket: Socket | null = null;
  private forget: () => void = () => {};
  private wait_ms = FIRST_WAIT_MS;
  private stopped = false;

  constructor(
    private readonly url: string,
    private readonly listener: Listener,
    private readonly world: World,
  ) {
    this.open();
  }

  stop(): void {
    this.stopped = true;
    this.forget();
    this.drop();
  }

  private open(): void {
    const socket = this.world.open(this.url);
    this.socket = socket;
    this.watch();
    socket.onopen = () => {
      this.watch();
      this.listener.onOpen();
    };
    socket.onmessage = (event) => {
      this.watch();
      this.wait_ms = FIRST_WAIT_MS;
      if (typeof event.data === 'string') this.listener.onText(event.data);
    };
    socket.onclose = () => this.down();
  }

  private watch(): void {
    this.forget();
    this.forget = this.world.after(SILENCE_MS, () => this.down());
  }

  /** A socket whose line is dead may take minutes to close: it is let go at once. */
  private down(): void {
    this.forget();
    this.drop();
    if (this.stopped) return;
    this.listener.onDown();
    this.forget = this.world.after(this.wait_ms, () => this.open());
    this.wait_ms = Math.min(2 * this.wait_ms, LONGEST_WAIT_MS);
  }

  private drop(): void {
    const socket = this.socket;
    this.socket = null;
    if (socket === null) return;
    socket.onopen = socket.onmessage = socket.onclose = null;
    socket.close();
  }
}

export const BROWSER: World = {
  open: (url) => new WebSocket(url) as Socket,
  after: (wait_ms, call) => {
    const id = setTimeout(call, wait_ms);
    return () => clearTimeout(id);
  },
};
