/** Calls `paint` at most once a screen frame, however often it is asked. */
export function oncePerFrame(paint: () => void): { ask(): void; stop(): void } {
  let id = 0;
  return {
    ask: () => {
      id ||= requestAnimationFrame(() => {
        id = 0;
        paint();
      });
    },
    stop: () => cancelAnimationFrame(id),
  };
}
