import { describe, expect, it } from 'vitest';
import css from './look.css?raw';

function palette(selector: string): Record<string, string> {
  const body = css.slice(css.indexOf(`${selector} {`)).split('}')[0] ?? '';
  return Object.fromEntries(
    [...body.matchAll(/--([a-z]+): (#[0-9a-f]{6});/g)].map(([, name, colour]) => [name, colour]),
  );
}

/** Relative luminance and contrast ratio by their definitions (WCAG 2.2, W3C 2023). */
function luminance(colour: string): number {
  const [r = 0, g = 0, b = 0] = [1, 3, 5].map((i) => {
    const share = Number.parseInt(colour.slice(i, i + 2), 16) / 255;
    return share <= 0.04045 ? share / 12.92 : ((share + 0.055) / 1.055) ** 2.4;
  });
  return 0.2126 * r + 0.7152 * g + 0.0722 * b;
}

function contrast(a: string, b: string): number {
  const [low = 0, high = 0] = [luminance(a), luminance(b)].sort((p, q) => p - q);
  return (high + 0.05) / (low + 0.05);
}

it('computes the contrast as its definition does', () => {
  expect(contrast('#000000', '#ffffff')).toBeCloseTo(21, 9);
  expect(contrast('#767676', '#ffffff')).toBeCloseTo(4.54, 2);
});

describe.each([
  ['day', ':root'],
  ['night', ":root[data-theme='night']"],
])('by %s', (_, selector) => {
  const colours = palette(selector);
  const on = (ink: string, ground: string): number =>
    contrast(colours[ink] ?? '', colours[ground] ?? '');

  it.each(['paper', 'sheet'])('numbers stand out on the %s, and words can be read', (ground) => {
    expect(on('ink', ground)).toBeGreaterThanOrEqual(7);
    for (const ink of ['soft', 'below', 'x', 'y'])
      expect(on(ink, ground)).toBeGreaterThanOrEqual(4.5);
  });
});
