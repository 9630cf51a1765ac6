import type { Columns } from './columns';
import type { Readings } from './protocol';

const THINNED = 3000;
/** The last minute comes in full, for the strip at its shortest and the trail. */
const LATELY_S = 60;
const EVERY_ROW = 20_000;

/**
 * Joins what the service still holds with what it sends from now on, in order and without a row
 * twice. Between opening and the answer about the past, new messages wait.
 */
export class Feed {
  private session: string | null = null;
  private caughtUp = false;
  private waiting: Readings[] | null = [];
  private turn = 0;

  constructor(
    private readonly columns: Columns,
    private readonly recent: (from_seq: number, points: number) => Promise<Readings>,
    private readonly changed: (gap: 'filled' | 'new' | 'cleared') => void,
  ) {}

  /** The connection is (again) open: nothing is taken before the past has been asked for. */
  opened(): void {
    this.turn += 1;
    this.caughtUp = false;
    this.waiting = [];
  }

  /** Every status names the session; another one means another program: its time starts anew. */
  async sessionIs(session: string, gap_s: number): Promise<void> {
    if (this.session !== session) {
      const first = this.session === null;
      this.session = session;
      this.columns.clear();
      if (!first) this.changed('cleared');
    }
    if (this.caughtUp) return;
    this.caughtUp = true;
    const turn = this.turn;
    let past: Readings | null = null;
    let lately: Readings | null = null;
    try {
      past = await this.recent(this.columns.lastSeq + 1, THINNED);
      lately = await this.recent(seqAt(past, LATELY_S), EVERY_ROW);
    } catch {
      // The past is a convenience: without it the strip starts now, and says nothing false.
    }
    if (turn !== this.turn) return;
    if (past) {
      const from = lately?.seq[0] ?? Infinity;
      this.columns.append(past, Math.max(gap_s, 3 * spacing_s(past)), from);
    }
    if (lately) this.columns.append(lately, gap_s);
    for (const readings of this.waiting ?? []) this.columns.append(readings, gap_s);
    this.waiting = null;
    this.changed('filled');
  }

  take(readings: Readings, gap_s: number): void {
    if (this.waiting) {
      this.waiting.push(readings);
      return;
    }
    if (this.columns.append(readings, gap_s) > 0) this.changed('new');
  }
}

/** Sequence number of the row `back_s` before the newest. */
function seqAt(readings: Readings, back_s: number): number {
  const from_s = (readings.t_s.at(-1) ?? 0) - back_s;
  const i = readings.t_s.findIndex((t_s) => t_s >= from_s);
  return readings.seq[Math.max(0, i)] ?? 0;
}

/** Typical distance of rows: a thinned past has wider steps that are no gaps. */
function spacing_s(readings: Readings): number {
  const steps = readings.t_s.slice(1).map((t_s, i) => t_s - (readings.t_s[i] ?? t_s));
  if (steps.length === 0) return 0;
  steps.sort((a, b) => a - b);
  return steps[Math.floor(0.9 * (steps.length - 1))] ?? 0;
}
