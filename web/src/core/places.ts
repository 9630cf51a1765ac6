import { decimalsNear, wholesOf } from './numbers';
import { Settled } from './settled';
import type { AxisShown } from './shown';

const MOST_DECIMALS = 5;
const DECIMALS_WITHOUT_NOISE = 3;

/**
 * How many digits both numbers get, in front of the point and behind it: the same for both, so
 * that one stands under the other, and changing slowly, so that neither jumps.
 */
export class Places {
  private readonly wholes = new Settled(1, 0, 5);
  private decimals: Settled | null = null;

  next(axes: readonly AxisShown[], t_s: number): { wholes: number; decimals: number } {
    const present = axes.filter((axis) => axis.value !== null);
    const now = this.decimals?.value ?? DECIMALS_WITHOUT_NOISE;
    let decimals = now;
    if (present.length > 0) {
      const wish = Math.max(
        ...present.map((axis) => decimalsNear(axis.noise ?? axis.u, now, MOST_DECIMALS)),
      );
      this.decimals ??= new Settled(wish, 2, 4);
      decimals = this.decimals.next(wish, t_s);
    }
    const wholes = Math.max(1, ...present.map((axis) => wholesOf(axis.value, decimals)));
    return { wholes: this.wholes.next(wholes, t_s), decimals };
  }
}
