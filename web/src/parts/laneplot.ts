import uPlot from 'uplot';
import { lengthWords } from '../core/clock';
import { alone } from '../core/envelope';
import { LANES_TOP, type Lanes } from '../core/lanes';

export interface Flag {
  t_s: number;
  text: string;
}

/** What is drawn: the part of time shown, the lanes in it, the marks and flags. */
export interface Scene {
  from_s: number;
  to_s: number;
  lanes: Lanes;
  timeMarks: { at_s: number; text: string }[];
  flags: readonly Flag[];
}

/** `lines`: X and Y. `envelope`: their means, then lowest and highest of X, and of Y. */
export type Manner = 'lines' | 'envelope';

interface Palette {
  ink: string;
  soft: string;
  hair: string;
  paper: string;
  x: string;
  y: string;
  /** How much of a colour a band takes, as two hexadecimal digits. */
  band: string;
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
    band: read('band'),
  };
}

/** Two lanes over time, X above Y. */
export class LanePlot {
  private readonly plot: uPlot;
  private palette: Palette;
  private scene: Scene | null = null;

  constructor(
    private readonly host: HTMLElement,
    private readonly manner: Manner,
    onCursor: (t_s: number | null) => void,
  ) {
    this.palette = paletteOf(host);
    const options = this.options(onCursor);
    const empty = options.series.map((): number[] => []) as uPlot.AlignedData;
    this.plot = new uPlot(options, empty, host);
  }

  draw(scene: Scene): void {
    this.scene = scene;
    this.plot.setData(scene.lanes.data, false);
    this.plot.setScale('t', { min: scene.from_s, max: scene.to_s });
    this.plot.redraw(false, true); // the marks are new even where the time is the same
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

  /** The time at a place on the screen. */
  timeAt(clientX: number): number {
    return this.plot.posToVal(this.share(clientX) * this.widthPx, 't');
  }

  /** Marks a stretch between two places on the screen; null takes the mark away. */
  mark(stretch: [fromX: number, toX: number] | null): void {
    const [a, b] = (stretch ?? [0, 0]).map((x) => this.share(x) * this.widthPx).sort((p, q) => p - q);
    const [left = 0, right = 0] = stretch === null ? [] : [a, b];
    const height = this.plot.over.clientHeight;
    this.plot.setSelect({ left, top: 0, width: right - left, height }, false);
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
      series: [
        { scale: 't' },
        this.line('x'),
        this.line('y'),
        ...(this.manner === 'lines' ? [] : [this.edge(), this.edge(), this.edge(), this.edge()]),
      ],
      bands: this.manner === 'lines' ? [] : [this.band('x', 4, 3), this.band('y', 6, 5)],
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
      points: {
        show: true,
        size: 4,
        stroke: () => this.palette[axis],
        fill: () => this.palette[axis],
        // Only those that no line shows; as many as there are would hide it.
        filter: (plot, i) => alone(plot.data[i] ?? []),
      },
    };
  }

  /** Highest and lowest: the band between them is what is seen. */
  private edge(): uPlot.Series {
    return { scale: 'lanes', width: 0, spanGaps: false, points: { show: false } };
  }

  private band(axis: 'x' | 'y', high: number, low: number): uPlot.Band {
    return { series: [high, low], fill: () => this.palette[axis] + this.palette.band };
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
    for (const { from_s, to_s, missing } of scene.lanes.gaps) {
      const a = Math.max(left, at(from_s));
      const b = Math.min(left + width, at(to_s));
      const length = lengthWords(to_s - from_s);
      const fits = (text: string): boolean => b - a > ctx.measureText(text).width + 8 * ratio;
      const text = [`no ${missing} ${length}`, length].find(fits);
      if (text !== undefined) ctx.fillText(text, (a + b) / 2, top + height / 2);
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
