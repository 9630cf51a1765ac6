import { Refused, runs, series, wholeRun } from '../core/api';
import { ProtocolError } from '../core/fields';
import type { Part } from '../core/part';
import type { Run, Series, WholeRun } from '../core/runs';

const POINTS = 1200;
const PATIENCE_MS = 120;

/** The log as the page sees it: the list, and one run with the part of it that is looked at. */
export class Log {
  /** null until the service has answered. */
  list = $state.raw<readonly Run[] | null>(null);
  run = $state.raw<WholeRun | null>(null);
  series = $state.raw<Series | null>(null);
  /** null: the whole run. */
  part = $state.raw<Part | null>(null);
  /** What the service refused last, in its own words. */
  refusal = $state('');

  private timer: ReturnType<typeof setTimeout> | undefined;
  private turn = 0;

  whole: Part = $derived({ from_s: 0, to_s: Math.max(this.run?.duration_s ?? 0, 1e-3) });
  shown: Part = $derived(this.part ?? this.whole);
  /** The whole run is here, and there is no angle in it. */
  blank = $derived(
    this.part === null &&
      this.series !== null &&
      this.series.x_min_arcsec.every((value) => value === null),
  );
  /** A few readings: there is nothing to see in less. */
  shortest_s = $derived(Math.max(0.5, 5 * (this.run?.every_s ?? 0)));

  async loadList(): Promise<void> {
    await this.ask(async () => {
      this.list = await runs();
    });
  }

  /** Shows a run, or none. */
  async open(id: number | null): Promise<void> {
    this.turn += 1;
    this.part = null;
    this.run = null;
    this.series = null;
    if (id !== null) await this.loadRun(id);
  }

  /** The run and its chart as they are now: one being recorded grows. */
  async loadRun(id: number): Promise<void> {
    const turn = ++this.turn;
    await this.ask(async () => {
      const [run, columns] = await Promise.all([wholeRun(id), series(id, this.part, POINTS)]);
      if (turn !== this.turn) return;
      this.run = run;
      this.series = columns;
    });
  }

  /** Looks at another part: at once with what is here, and soon with what the service answers. */
  look(part: Part | null): void {
    this.part = part;
    this.turn += 1;
    clearTimeout(this.timer);
    this.timer = setTimeout(() => void this.loadSeries(), PATIENCE_MS);
  }

  private async loadSeries(): Promise<void> {
    const turn = ++this.turn;
    const id = this.run?.id;
    if (id === undefined) return;
    await this.ask(async () => {
      const columns = await series(id, this.part, POINTS);
      if (turn === this.turn) this.series = columns;
    });
  }

  private async ask(what: () => Promise<void>): Promise<void> {
    try {
      await what();
      this.refusal = '';
    } catch (error) {
      if (!(error instanceof Refused || error instanceof ProtocolError)) throw error;
      this.refusal = error.message;
    }
  }
}
