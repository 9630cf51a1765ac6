import {
  newestReading,
  readSettings,
  recent,
  Refused,
  setZero,
  startRun,
  stopRun,
  takeZeroBack,
  writeSettings,
} from './core/api';
import { Columns } from './core/columns';
import { brokenOff, withEvent } from './core/events';
import { Feed } from './core/feed';
import { ProtocolError } from './core/fields';
import { changedSince, isOfSession, sceneOf, type Held, type Scene } from './core/held';
import { SettingsKeeper } from './core/keeper';
import { nextFrame, Pace, unhurried } from './core/pace';
import {
  decode,
  type Average,
  type Message,
  type Newest,
  type Readings,
  type SourceEvent,
  type Status,
} from './core/protocol';
import type { NewRun } from './core/runs';
import { FIRST_SETTINGS, type Settings } from './core/settings';
import { shownAngle, shownPosition, type Shown } from './core/shown';
import { BROWSER, Connection } from './core/socket';
import { spreadOf, type Spread } from './core/statistics';
import type { Unit } from './core/units';
import { noticesOf, type Notice } from './core/words';

const KEPT_S = 600;
const TICK_MS = 100;
const REFUSAL_MS = 10_000;
const STATISTICS_S = 30;
const KEPT_EVENTS = 100;

/** Everything the page knows of the instrument, and the few things it can ask of it. */
export class Instrument {
  connected = $state(true);
  status = $state.raw<Status | null>(null);
  /** What the newest reading says. */
  live = $state.raw<Scene | null>(null);
  /** Seconds since the last reading; null while that is not known. */
  age_s = $state<number | null>(null);
  events = $state.raw<readonly SourceEvent[]>([]);
  settings = $state.raw<Settings>(FIRST_SETTINGS);
  held = $state.raw<Held | null>(null);
  /** The numbers on the page, and what they were made of. */
  scene: Scene | null = $derived(this.held ?? this.live);
  shown: Shown | null = $derived(this.scene?.shown ?? null);
  /** The hold, while what is drawn can stand still with it: its times are those of this session. */
  private still: Held | null = $derived(
    this.held && isOfSession(this.held, this.status) ? this.held : null,
  );
  /** What is drawn beside the numbers. */
  drawn: Scene | null = $derived(this.still ?? this.live);
  /** What has changed under the hold. */
  heldChanges: string[] = $derived(
    this.held && this.status ? changedSince(this.held, this.status) : [],
  );
  /** What the service refused last, in its own words. */
  refusal = $state('');
  spread = $state.raw<{ x: Spread | null; y: Spread | null }>({ x: null, y: null });
  dropped = $state(0);
  /** Grows with each screen frame that has new readings. */
  pulse = $state(0);

  readonly columns = new Columns(KEPT_S);

  private seenBroken: string | undefined = $state();

  notices: Notice[] = $derived(
    noticesOf(
      this.connected,
      this.status?.state ?? null,
      this.status?.state_detail ?? '',
      this.status?.simulated ?? false,
    ),
  );
  calibration = $derived(this.status?.calibration ?? null);
  /** Of the numbers on the page. */
  provenSigns = $derived((this.scene ?? this.status)?.calibration?.signs === 'proven');
  zero = $derived(this.status?.zero ?? null);
  /** The run being recorded. */
  run = $derived(this.status?.run ?? null);
  /** Why a run broke off, until somebody has seen it or another one begins. */
  broken: SourceEvent | null = $derived.by(() => {
    const event = brokenOff(this.events);
    return event?.t_utc === this.seenBroken ? null : event;
  });
  image_px: [number, number] = $derived([
    this.status?.image_width_px ?? 640,
    this.status?.image_height_px ?? 480,
  ]);
  /** The numbers are those of now. */
  alive: boolean = $derived(this.connected && this.status?.state === 'measuring');
  /** What is drawn follows the mirror. */
  current: boolean = $derived(this.alive && this.still === null);
  unit: Unit = $derived(
    this.still?.shown.unit ?? (this.status?.calibration === null ? 'px' : this.settings.unit),
  );
  gap_s = $derived(Math.max(0.5, 3 / Math.max(this.status?.frames_per_s ?? 30, 0.1)));

  private newest: Newest | null = null;
  private average: Average | null = null;
  private arrived_ms: number | null = null;
  private refused_ms = 0;
  private ticks = 0;
  private readonly lessMotion = matchMedia('(prefers-reduced-motion: reduce)');
  private readonly paint = new Pace(
    () => (this.pulse += 1),
    () => (this.lessMotion.matches ? unhurried : nextFrame),
  );
  private readonly feed = new Feed(
    this.columns,
    (from_seq, points) => this.past(from_seq, points),
    (change) => {
      if (change === 'cleared') this.forget();
      this.paint.ask();
    },
  );

  private readonly keeper = new SettingsKeeper(
    readSettings,
    writeSettings,
    () => this.settings,
    (settings) => (this.settings = settings),
  );

  /** Opens the stream; the answer ends it. */
  start(): () => void {
    const connection = new Connection(
      new URL('api/stream', document.baseURI).href.replace(/^http/, 'ws'),
      {
        onOpen: () => {
          this.connected = true;
          this.feed.opened();
          void this.readSettings();
        },
        onText: (text) => this.take(text),
        onDown: () => (this.connected = false),
      },
      BROWSER,
    );
    const timer = setInterval(() => this.tick(performance.now()), TICK_MS);
    return () => {
      connection.stop();
      clearInterval(timer);
      this.paint.stop();
    };
  }

  /**
   * The right end of what is drawn: that of the hold while one is on, else the newest reading;
   * when readings stay out it goes on, so that the strip grows white. What has ended stands.
   */
  get now_s(): number {
    if (this.still) return this.still.t_s;
    const newest_s = this.columns.t_s.at(-1) ?? 0;
    const over =
      this.connected && (this.status?.state === 'ended' || this.status?.state === 'failed');
    return this.alive || over ? newest_s : newest_s + (this.age_s ?? 0);
  }

  /** When the numbers on the page were read, by the clock. */
  get readAt(): Date {
    return new Date(Date.parse(this.scene?.session ?? '') + 1000 * (this.scene?.t_s ?? 0));
  }

  /** What the right end of the strip is called. */
  get endWord(): string {
    if (this.still) return 'held';
    if (this.connected && this.status?.state === 'ended') return 'end';
    return this.alive || this.age_s !== null ? 'now' : 'last';
  }

  hold(): void {
    this.held = this.held || !this.live ? null : { ...this.live, at: new Date() };
  }

  change(part: Partial<Settings>): Promise<void> {
    return this.ask(() => this.keeper.change(part));
  }

  setZero(): Promise<void> {
    return this.ask(setZero);
  }

  takeZeroBack(): Promise<void> {
    return this.ask(takeZeroBack);
  }

  seeBroken(): void {
    this.seenBroken = this.broken?.t_utc;
  }

  startRun(run: NewRun): Promise<void> {
    return this.ask(() => startRun(run));
  }

  stopRun(id: number): Promise<void> {
    return this.ask(() => stopRun(id));
  }

  private readSettings(): Promise<void> {
    return this.ask(() => this.keeper.refresh());
  }

  private async ask(what: () => Promise<void>): Promise<void> {
    try {
      await what();
      this.refusal = '';
    } catch (error) {
      if (!(error instanceof Refused || error instanceof ProtocolError)) throw error;
      this.refuse(error.message);
    }
  }

  private refuse(line: string): void {
    this.refusal = line;
    this.refused_ms = performance.now();
  }

  /** Another program answers now: its readings have nothing to do with those before. */
  private forget(): void {
    this.newest = this.average = this.live = null;
    this.age_s = null;
    this.arrived_ms = null;
    this.events = [];
  }

  private take(text: string): void {
    try {
      this.takeMessage(decode(text));
    } catch (error) {
      if (!(error instanceof ProtocolError)) throw error;
      this.refuse(`${error.message}: this page and the service do not fit, load it again`);
    }
  }

  private takeMessage(message: Message): void {
    switch (message.kind) {
      case 'readings':
        this.takeReadings(message);
        break;
      case 'status':
        this.takeStatus(message);
        void this.feed.sessionIs(message.session_start_utc, this.gap_s);
        break;
      case 'event':
        this.events = withEvent(this.events, message, KEPT_EVENTS);
        if (message.event === 'settings') void this.readSettings();
        this.paint.ask();
        break;
      default: {
        const never: never = message;
        throw new Error(String(never));
      }
    }
  }

  /** Another scale while no reading comes: the last one is asked for again, as it is read now. */
  private takeStatus(status: Status): void {
    const before = this.status;
    this.status = status;
    const another = before !== null && before.calibration?.id !== status.calibration?.id;
    if (!another || status.state === 'measuring' || this.newest === null) return;
    void this.ask(async () => {
      const { newest, average } = await newestReading();
      this.newest = newest;
      this.average = average;
    });
  }

  /** What the service still holds; its newest row is shown until another one comes, if one does. */
  private async past(from_seq: number, points: number): Promise<Readings> {
    const readings = await recent(from_seq, points);
    if (this.newest === null && readings.seq.length > 0) {
      this.newest = newestOf(readings, readings.seq.length - 1);
      this.average = readings.average;
      void this.learnAge();
    }
    return readings;
  }

  /** A reading from before this page was opened: the service knows how old it is. */
  private async learnAge(): Promise<void> {
    try {
      const { age_s } = await newestReading();
      if (age_s !== null) this.arrived_ms ??= performance.now() - 1000 * age_s;
    } catch (error) {
      // Of a source that is gone there is no newest reading: the page then names the time alone.
      if (!(error instanceof Refused)) throw error;
    }
  }

  private takeReadings(readings: Readings): void {
    const last = readings.seq.length - 1;
    if (last < 0) return;
    this.newest = newestOf(readings, last);
    this.average = readings.average;
    this.dropped = readings.dropped;
    this.arrived_ms = performance.now();
    this.feed.take(readings, this.gap_s);
  }

  private tick(now_ms: number): void {
    this.ticks += 1;
    if (this.arrived_ms !== null) this.age_s = (now_ms - this.arrived_ms) / 1000;
    if (this.refusal !== '' && now_ms - this.refused_ms > REFUSAL_MS) this.refusal = '';
    if (this.newest === null || this.status === null) return;
    const t_s = this.columns.t_s.at(-1) ?? 0;
    const shown =
      this.status.calibration === null
        ? this.positionShown(this.newest, t_s)
        : shownAngle(this.average, this.newest, this.status.zero, this.settings.unit);
    this.live = sceneOf(shown, t_s, this.status);
    if (this.ticks % 5 === 0 && !this.still) this.spread = this.spreadNow();
  }

  private positionShown(newest: Newest, to_s: number): Shown {
    const [from, to] = [
      this.columns.indexAt(to_s - this.settings.average_s),
      this.columns.indexAt(to_s + 1e-6),
    ];
    return shownPosition(
      spreadOf(this.columns.of('x_px').slice(from, to)),
      spreadOf(this.columns.of('y_px').slice(from, to)),
      newest,
      this.settings.average_s,
    );
  }

  private spreadNow(): { x: Spread | null; y: Spread | null } {
    const from = this.columns.indexAt((this.columns.t_s.at(-1) ?? 0) - STATISTICS_S);
    const angle = this.status?.calibration !== null;
    return {
      x: spreadOf(this.columns.of(angle ? 'x_arcsec' : 'x_px').slice(from)),
      y: spreadOf(this.columns.of(angle ? 'y_arcsec' : 'y_px').slice(from)),
    };
  }
}

function newestOf(readings: Readings, i: number): Newest {
  return {
    x_arcsec: readings.x_arcsec[i] ?? null,
    y_arcsec: readings.y_arcsec[i] ?? null,
    x_sd_arcsec: readings.x_sd_arcsec[i] ?? null,
    y_sd_arcsec: readings.y_sd_arcsec[i] ?? null,
    x_u_arcsec: readings.x_u_arcsec[i] ?? null,
    y_u_arcsec: readings.y_u_arcsec[i] ?? null,
    x_rel_u_arcsec: readings.x_rel_u_arcsec[i] ?? null,
    y_rel_u_arcsec: readings.y_rel_u_arcsec[i] ?? null,
    x_px: readings.x_px[i] ?? null,
    y_px: readings.y_px[i] ?? null,
    quality: readings.quality[i] ?? [],
  };
}
