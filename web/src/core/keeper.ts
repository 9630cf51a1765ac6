import type { Settings } from './settings';

/**
 * Keeps what the page shows of the settings with what the service holds. A wish is shown at once;
 * what was changed elsewhere is read when no wish is under way, so that no answer to an older
 * question undoes a newer wish.
 */
export class SettingsKeeper {
  private wishes = 0;
  private stale = false;
  private reading: Promise<void> | null = null;

  constructor(
    private readonly read: () => Promise<Settings>,
    private readonly write: (part: Partial<Settings>) => Promise<Settings>,
    private readonly now: () => Settings,
    private readonly show: (settings: Settings) => void,
  ) {}

  /** Throws what `write` throws, with the settings as they were before. */
  async change(part: Partial<Settings>): Promise<void> {
    const before = this.now();
    this.show({ ...before, ...part });
    this.wishes += 1;
    try {
      const after = await this.write(part);
      if (this.wishes === 1) this.show(after);
    } catch (error) {
      this.show(before);
      throw error;
    } finally {
      this.wishes -= 1;
      if (this.wishes > 0) this.stale = true;
    }
    if (this.wishes === 0 && this.stale) await this.refresh();
  }

  /** Reads what the service holds; several callers at once are served by one more reading. */
  refresh(): Promise<void> {
    this.stale = true;
    this.reading ??= this.readAll().finally(() => (this.reading = null));
    return this.reading;
  }

  private async readAll(): Promise<void> {
    while (this.stale && this.wishes === 0) {
      this.stale = false;
      const settings = await this.read();
      if (this.wishes === 0 && !this.stale) this.show(settings);
      else this.stale = true;
    }
  }
}
