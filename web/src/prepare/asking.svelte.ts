import { Refused } from '../core/api';
import { ProtocolError } from '../core/fields';

/** What a part of the page asks of the service: one thing at a time, its refusal kept as a line. */
export class Asking {
  refusal = $state('');
  busy = $state(false);

  /** The answer; null when it was refused. */
  async ask<T>(what: () => Promise<T>): Promise<T | null> {
    this.busy = true;
    try {
      const answer = await what();
      this.refusal = '';
      return answer;
    } catch (error) {
      if (!(error instanceof Refused || error instanceof ProtocolError)) throw error;
      this.refusal = error.message;
      return null;
    } finally {
      this.busy = false;
    }
  }
}

/** Does something again and again, the next time only when it is done; the answer ends it. */
export function again(every_ms: number, what: () => Promise<unknown>): () => void {
  let timer: ReturnType<typeof setTimeout> | undefined;
  let over = false;
  const turn = async (): Promise<void> => {
    await what();
    if (!over) timer = setTimeout(() => void turn(), every_ms);
  };
  void turn();
  return () => {
    over = true;
    clearTimeout(timer);
  };
}
