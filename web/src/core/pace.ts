/** What paints wait for; a test gives its own. */
export type Next = (call: () => void) => () => void;

/** The screen's next frame. */
export const nextFrame: Next = (call) => {
  const id = requestAnimationFrame(call);
  return () => cancelAnimationFrame(id);
};

/** Twice a second, for those who asked their system for less motion. */
export const unhurried: Next = (call) => {
  const id = setTimeout(call, 500);
  return () => clearTimeout(id);
};

/** Paints once at the next moment, however often it is asked before. */
export class Pace {
  private cancel: (() => void) | null = null;

  constructor(
    private readonly paint: () => void,
    private readonly next: () => Next,
  ) {}

  ask(): void {
    this.cancel ??= this.next()(() => {
      this.cancel = null;
      this.paint();
    });
  }

  stop(): void {
    this.cancel?.();
    this.cancel = null;
  }
}
