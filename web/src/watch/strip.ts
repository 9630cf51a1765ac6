import uPlot from 'uplot';
import { LANES_TOP, type Lanes } from '../core/lanes';

export interface Flag {
  t_s: number;
  text: string;
}

/** What the plot asks for at each drawing; the strip's component answers from its state. */
export interface Scene {
  from_s: number;
  to_s: number;
  lanes: Lanes;
  timeMarks: { at_s: number; text: string }[];
  flags: readonly Flag[];
}

interface Palette {
  ink: string;
  soft: string;
  hair: string;
  paper: string;
  x: string;
  y: string;
}

const FONT_PX = 13;

/** CSS does not reach the canvas: the colours are read from it and given to the plot. */
function paletteOf(element: Element): Palette {
  const style = getComputedStyle(element);
  const read = (name: string): string => style.getPropertyValue(`--${name}`).trim();
  return {
    ink: read('ink'),
    soft: read('soft'),
    hair: read('hair'),
    paper: read('paper'),
    x: read('x'),
    y: read('y'),
  };
}

export class StripPlot {
  private readonly plot: uPlot;
  private palette: Palette;
  private scene: Scene | null = null;

  constructor(
    private readonly host: HTMLElement,
    onCursor: (t_s: number | null) => void,
  ) {
    this.palette = paletteOf(host);
    this.plot = new uPlot(this.options(onCursor), [[], [], []], host);
  }

  draw(scene: Scene): void {
    this.scene = scene;
    this.plot.setData(scene.lanes.data, false);
    this.plot.setScale('t', { min: scene.from_s, max: scene.to_s });
  }

  resize(width: number, height: number): void {
    if (width > 0 && height > 0) this.plot.setSize({ width, height });
  }

  repaint(): void {
    this.palette = paletteOf(this.host);
    this.plot.redraw(false, true);
  }

  /** Share of the plotting area's width, 0 left and 1 right, for a place on the screen. */
  share(clientX: number): number {
    const box = this.plot.over.getBoundingClientRect();
    return Math.min(1, Math.max(0, (clientX - box.left) / box.width));
  }

  get widthPx(): number {
    return this.plot.over.clientWidth;
  }

  destroy(): void {
    this.plot.destroy();
  }

  private options(onCursor: (t_s: number | null) => void): uPlot.Options {
    const font = `${FONT_PX}px "Atkinson Hyperlegible Mono", monospace`;
    return {
      width: 600,
      height: 180,
      pxAlign: 1,
      padding: [20, 28, 0, 0],
      legend: { show: false },
      cursor: { y: false, drag: { x: false, y: false }, points: { show: false } },
      scales: {
        t: { time: false, auto: false },
        lanes: { auto: false, range: [0, LANES_TOP] },
      },
      series: [{ scale: 't' }, this.line('x'), this.line('y')],
      axes: [
        {
          scale: 't',
          font,
          size: 28,
          gap: 4,
          stroke: () => this.palette.ink,
          grid: { show: false },
          ticks: { stroke: () => this.palette.ink, width: 1, size: 5 },
          splits: () => this.scene?.timeMarks.map((mark) => mark.at_s) ?? [],
          values: () => this.scene?.timeMarks.map((mark) => mark.text) ?? [],
        },
        {
          scale: 'lanes',
          font,
          size: 88,
          gap: 6,
          stroke: () => this.palette.ink,
          grid: { stroke: () => this.palette.hair, width: 1 },
          ticks: { show: false },
          splits: () => this.scene?.lanes.marks.map((mark) => mark.at) ?? [],
          values: () => this.scene?.lanes.marks.map((mark) => mark.label) ?? [],
        },
      ],
      hooks: {
        draw: [(plot) => this.drawNotes(plot)],
        setCursor: [
          (plot) => {
            const left = plot.cursor.left ?? -1;
            onCursor(left < 0 ? null : plot.posToVal(left, 't'));
          },
        ],
      },
    };
  }

  private line(axis: 'x' | 'y'): uPlot.Series {
    return {
      scale: 'lanes',
      stroke: () => this.palette[axis],
      width: 1.25,
      spanGaps: false,
      points: { show: false },
    };
  }

  /** Words in the gaps, flags of events, and a rule between the lanes. */
  private drawNotes(plot: uPlot): void {
    const scene = this.scene;
    if (scene === null) return;
    const { ctx } = plot;
    const ratio = uPlot.pxRatio;
    const { left, top, width, height } = plot.bbox;
    const at = (t_s: number): number => plot.valToPos(t_s, 't', true);
    ctx.save();
    ctx.font = `${FONT_PX * ratio}px "Atkinson Hyperlegible Mono", monospace`;
    ctx.textBaseline = 'middle';
    ctx.lineWidth = ratio;
    const base = top + height;
    ctx.strokeStyle = this.palette.ink;
    ctx.beginPath();
    ctx.moveTo(left, base);
    ctx.lineTo(left + width, base);
    ctx.stroke();
    ctx.textAlign = 'center';
    ctx.fillStyle = this.palette.soft;
    for (const [from_s, to_s] of scene.lanes.gaps) {
      const a = Math.max(left, at(from_s));
      const b = Math.min(left + width, at(to_s));
      const text = `no reading ${(to_s - from_s).toFixed(1)} s`;
      if (b - a > ctx.measureText(text).width + 12 * ratio) {
        ctx.fillText(text, (a + b) / 2, top + height / 2);
      }
    }
    this.drawFlags(ctx, scene, at, { left, top, right: left + width, base }, ratio);
    ctx.restore();
  }

  private drawFlags(
    ctx: CanvasRenderingContext2D,
    scene: Scene,
    at: (t_s: number) => number,
    box: { left: number; top: number; right: number; base: number },
    ratio: number,
  ): void {
    ctx.textAlign = 'left';
    let taken = -Infinity;
    for (const flag of [...scene.flags].sort((a, b) => a.t_s - b.t_s)) {
      const x = at(flag.t_s);
      if (x < box.left || x > box.right) continue;
      ctx.strokeStyle = this.palette.soft;
      ctx.setLineDash([2 * ratio, 3 * ratio]);
      ctx.beginPath();
      ctx.moveTo(x, box.top - 2 * ratio);
      ctx.lineTo(x, box.base);
      ctx.stroke();
      ctx.setLineDash([]);
      const wide = ctx.measureText(flag.text).width + 12 * ratio;
      const tall = 18 * ratio;
      const start = Math.min(x, box.right - wide);
      if (start < taken + 4 * ratio) continue;
      taken = start + wide;
      ctx.fillStyle = this.palette.paper;
      ctx.fillRect(start, box.top - tall - 1, wide, tall);
      ctx.strokeStyle = this.palette.ink;
      ctx.strokeRect(start, box.top - tall - 1, wide, tall);
      ctx.fillStyle = this.palette.ink;
      ctx.fillText(flag.text, start + 6 * ratio, box.top - tall / 2);
    }
  }
}
