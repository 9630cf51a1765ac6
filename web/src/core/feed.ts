import type { Columns } from './columns';
import type { Readings } from './protocol';

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
    private readonly recent: (from_seq: number) => Promise<Readings>,
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
    try {
      past = await this.recent(this.columns.lastSeq + 1);
    } catch {
      // The past is a convenience: without it the strip starts now, and says nothing false.
      past = null;
    }
    if (turn !== this.turn) return;
    if (past) this.columns.append(past, Math.max(gap_s, 3 * spacing_s(past)));
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

/** Typical distance of rows: a thinned past has wider steps that are no gaps. */
function spacing_s(readings: Readings): number {
  const steps = readings.t_s.slice(1).map((t_s, i) => t_s - (readings.t_s[i] ?? t_s));
  if (steps.length === 0) return 0;
  steps.sort((a, b) => a - b);
  return steps[Math.floor(0.9 * (steps.length - 1))] ?? 0;
}
