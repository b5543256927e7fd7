/**
 * One curve of a result as a small picture: markers with their error bars over lines, axes with their names.
 *
 * Drawn at a fixed size in its own units and scaled by the page, so a copy in print has the same proportions. What is
 * drawn is told apart by shape: markers are data, a line is exact, a tinted band is a fit.
 */

import { formula, html, svg, type Typeset } from './elements.js';
import { valueWithError } from './numbers.js';
import type { Curve, Point } from './payload.js';
import { envelope, linear, logarithmic, thinned, type Scale } from './scales.js';

const WIDTH = 400;
const HEIGHT = 240;
const LEFT = 58;
const RIGHT = 14;
const TOP = 10;
const BOTTOM = 42;
const MOST_MARKERS = 160;
const MOST_BINS = 300;
const MARKS_ACROSS = 6;
const MARKS_UP = 5;
const WIDE_RANGE = 20; // from this ratio of its ends on, a correlator opens on a logarithmic axis

type AxisKind = 'linear' | 'logarithmic';

interface Frame {
  readonly x: (value: number) => number;
  readonly y: (value: number) => number;
  readonly across: Scale;
  readonly up: Scale;
}

/** The figure of a curve, with its caption and, where it makes sense, a button for the kind of its axis. */
export function figureOf(curve: Curve, typeset: Typeset): HTMLElement {
  const figure = html('figure', 'figure');
  figure.append(html('div', 'curveTitle', formula(curve.label, curve.latex, typeset)));
  if (curve.points.length === 0) {
    figure.append(html('figcaption', 'note', 'This curve holds no numbers.'));
    return figure;
  }
  const canvas = html('div', 'canvas');
  const caption = html('span', '');
  const button = html('button', 'axis');
  let kind: AxisKind = opensLogarithmic(curve) ? 'logarithmic' : 'linear';
  const draw = (): void => {
    canvas.replaceChildren(picture(curve, kind));
    caption.textContent = captionOf(curve, kind);
    button.textContent = kind === 'linear' ? 'logarithmic axis' : 'linear axis';
  };
  button.type = 'button';
  button.dataset['lmSuppressShortcuts'] = 'true'; // Enter and Space are for the button, not for the notebook
  button.addEventListener('click', () => {
    kind = kind === 'linear' ? 'logarithmic' : 'linear';
    draw();
  });
  draw();
  figure.append(canvas, html('figcaption', 'note', caption));
  if (curve.style === 'correlator' && curve.points.some(point => point.y > 0)) {
    figure.lastElementChild?.append(' ', button);
  }
  return figure;
}

function opensLogarithmic(curve: Curve): boolean {
  const values = curve.points.map(point => point.y);
  const low = values.reduce((a, b) => Math.min(a, b));
  const high = values.reduce((a, b) => Math.max(a, b));
  return curve.style === 'correlator' && low > 0 && high / low >= WIDE_RANGE;
}

function picture(curve: Curve, kind: AxisKind): SVGElement {
  const frame = frameOf(curve, kind);
  const layers = [...axes(curve, frame)];
  if (curve.plateau) {
    layers.push(...plateau(curve.plateau, frame, kind));
  }
  if (curve.exact.length > 0) {
    layers.push(line(curve.exact, frame, kind, 'qt-Plot-exact'));
  }
  layers.push(...data(curve, frame, kind));
  const title = `${curve.label} against ${curve.xLabel || 'its argument'}. ${captionOf(curve, kind)}`;
  return svg(
    'svg',
    { viewBox: `0 0 ${WIDTH} ${HEIGHT}`, role: 'img', 'aria-label': title, class: 'qt-Plot' },
    ...layers
  );
}

/** The axes hold all points, their error bars, the exact line and the fit. */
function frameOf(curve: Curve, kind: AxisKind): Frame {
  const seen = visible([...curve.points, ...curve.exact], kind);
  const heights = seen.flatMap(({ y, error }) => [y - (error ?? 0), y + (error ?? 0), y]);
  if (curve.plateau) {
    heights.push(curve.plateau.value - curve.plateau.error, curve.plateau.value + curve.plateau.error);
  }
  const allowed = kind === 'linear' ? heights : withoutTinyEnds(heights, seen);
  const [left, right] = ends(seen.map(point => point.x));
  const [low, high] = ends(allowed);
  const across = linear(left, right, MARKS_ACROSS);
  const room = kind === 'linear' ? 0.04 * (high - low) : 0;
  const up = kind === 'linear' ? linear(low - room, high + room, MARKS_UP) : logarithmic(low, high, MARKS_UP);
  return {
    across,
    up,
    x: value => LEFT + 6 + across.place(value) * (WIDTH - LEFT - RIGHT - 12),
    y: value => HEIGHT - BOTTOM - up.place(value) * (HEIGHT - TOP - BOTTOM)
  };
}

/** An error bar that reaches to zero would open a logarithmic axis without end; half the smallest value is enough. */
function withoutTinyEnds(heights: readonly number[], seen: readonly Point[]): readonly number[] {
  const smallest = seen.reduce((low, point) => Math.min(low, point.y), Infinity);
  return heights.map(height => Math.max(height, smallest / 2));
}

function visible(points: readonly Point[], kind: AxisKind): readonly Point[] {
  return kind === 'linear' ? points : points.filter(point => point.y > 0);
}

/** Not by spreading into Math.min: a long run has more points than a call has room for arguments. */
function ends(values: readonly number[]): [number, number] {
  const low = values.reduce((a, b) => Math.min(a, b), Infinity);
  const high = values.reduce((a, b) => Math.max(a, b), -Infinity);
  return low <= high ? [low, high] : [0, 1];
}

function axes(curve: Curve, frame: Frame): SVGElement[] {
  const base = HEIGHT - BOTTOM + 8;
  const across = frame.across.ticks.flatMap(tick => {
    const x = frame.x(tick.at);
    return [
      svg('line', { x1: x, x2: x, y1: base, y2: base + 4 }),
      svg('text', { x, y: base + 16, 'text-anchor': 'middle' }, tick.label)
    ];
  });
  const side = LEFT - 4;
  const up = frame.up.ticks.flatMap(tick => {
    const y = frame.y(tick.at);
    return [
      svg('line', { x1: side - 4, x2: side, y1: y, y2: y }),
      svg('text', { x: side - 7, y: y + 3.5, 'text-anchor': 'end' }, tick.label)
    ];
  });
  const name = svg(
    'text',
    { x: WIDTH - RIGHT - 6, y: HEIGHT - 5, 'text-anchor': 'end', class: 'qt-Plot-name' },
    curve.xLabel
  );
  return [
    svg(
      'g',
      { class: 'qt-Plot-axes' },
      svg('line', { x1: LEFT + 6, x2: WIDTH - RIGHT - 6, y1: base, y2: base }),
      svg('line', { x1: side, x2: side, y1: TOP, y2: HEIGHT - BOTTOM }),
      ...across,
      ...up,
      name
    )
  ];
}

function plateau(fit: NonNullable<Curve['plateau']>, frame: Frame, kind: AxisKind): SVGElement[] {
  if (kind === 'logarithmic' && fit.value <= 0) {
    return [];
  }
  const floor = kind === 'linear' ? -Infinity : fit.value / 2;
  const [left, right] = [frame.x(fit.from), frame.x(fit.to)];
  const [top, bottom] = [frame.y(fit.value + fit.error), frame.y(Math.max(floor, fit.value - fit.error))];
  const middle = frame.y(fit.value);
  return [
    svg('rect', { class: 'qt-Plot-band', x: left, y: top, width: right - left, height: bottom - top }),
    svg('line', { class: 'qt-Plot-fit', x1: left, x2: right, y1: middle, y2: middle })
  ];
}

function data(curve: Curve, frame: Frame, kind: AxisKind): SVGElement[] {
  const points = visible(curve.points, kind);
  if (isLine(curve)) {
    return [line(points, frame, kind, 'qt-Plot-line')];
  }
  const floor = HEIGHT - BOTTOM + 4;
  const inside = (y: number): number => (Number.isFinite(y) ? Math.min(floor, Math.max(TOP - 4, y)) : floor);
  const markers = thinned(points, MOST_MARKERS).flatMap(({ x, y, error }) => {
    const at = frame.x(x);
    const marker = svg('circle', { cx: at, cy: frame.y(y), r: 2 });
    if (error === null || error === 0) {
      return [marker];
    }
    const low = kind === 'logarithmic' && y - error <= 0 ? floor : inside(frame.y(y - error));
    return [svg('line', { x1: at, x2: at, y1: inside(frame.y(y + error)), y2: low }), marker];
  });
  return [svg('g', { class: 'qt-Plot-data' }, ...markers)];
}

function isLine(curve: Curve): boolean {
  return curve.style === 'history' || curve.style === 'wave' || curve.style === 'potential';
}

function line(points: readonly Point[], frame: Frame, kind: AxisKind, name: string): SVGElement {
  const drawn = envelope(visible(points, kind), MOST_BINS).map(({ x, y }) => {
    return `${frame.x(x).toFixed(1)},${frame.y(y).toFixed(1)}`;
  });
  return svg('polyline', { class: name, points: drawn.join(' ') });
}

/** What each shape in the picture is, and what is missing from it, in words. */
function captionOf(curve: Curve, kind: AxisKind): string {
  const parts: string[] = [];
  const markers = visible(curve.points, kind).length;
  if (!isLine(curve)) {
    const bars = curve.points.some(point => point.error !== null);
    parts.push(bars ? 'Points: value and one standard error.' : 'Points: values, without errors.');
    if (markers > MOST_MARKERS) {
      parts.push(`${MOST_MARKERS} of ${markers} points are drawn.`);
    }
  }
  if (curve.exact.length > 0) {
    parts.push('Line: exact at the same spacing.');
  }
  if (curve.plateau) {
    const { value, error, from, to } = curve.plateau;
    parts.push(`Band: fit from ${from} to ${to}, ${valueWithError(value, error)}.`);
  }
  if (markers < curve.points.length) {
    parts.push(`${curve.points.length - markers} values that are not positive have no place on this axis.`);
  }
  if (curve.dropped > 0) {
    parts.push(`${curve.dropped} entries are left out: not numbers, or too large to draw.`);
  }
  return parts.join(' ');
}
