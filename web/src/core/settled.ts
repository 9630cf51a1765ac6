/**
 * A count that follows its wish slowly, so that the width of a number does not flicker: it grows
 * after `grow_s`, shrinks after `shrink_s` of the same direction without a break.
 */
export class Settled {
  private since_s: number | null = null;

  constructor(
    public value: number,
    private readonly grow_s: number,
    private readonly shrink_s: number,
  ) {}

  next(wish: number, t_s: number): number {
    if (wish === this.value) {
      this.since_s = null;
      return this.value;
    }
    this.since_s ??= t_s;
    const wait_s = wish > this.value ? this.grow_s : this.shrink_s;
    if (t_s - this.since_s >= wait_s) {
      this.value = wish;
      this.since_s = null;
    }
    return this.value;
  }
}
