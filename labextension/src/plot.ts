/**
 * A small picture of curves: markers with their error bars over lines, axes with their names.
 *
 * Drawn at a fixed size in its own units and scaled by the page, so a copy in print has the same proportions. What is
 * drawn is told apart by shape: markers are data, a thin line is exact, a tinted band is a fit.
 */

import { svg } from './elements.js';
import type { Curve, Plateau, Point } from './payload.js';
import { envelope, linear, logarithmic, thinned, type Scale } from './scales.js';

export const MOST_MARKERS = 160;

const WIDTH = 400;
const HEIGHT = 240;
const LEFT = 58;
const RIGHT = 14;
const TOP = 10;
const BOTTOM = 42;
const GAP = 6; // between the axes and what is drawn
const MOST_BINS = 300;
const MARKS_ACROSS = 6;
const MARKS_UP = 5;
const ROOM = 0.04; // of the height, above and below the data
const WAVE_FILL = 0.8; // height of the largest wave function over the distance of levels
const FAR = 1e4; // off the page, and still a number that every browser can draw
const SERIES = 3; // colours, used in turn

export type AxisKind = 'linear' | 'logarithmic';

/** Curves that are drawn together. */
export interface Panel {
  readonly kind: 'points' | 'history' | 'paths' | 'waves';
  readonly curves: [Curve, ...Curve[]];
}

interface Frame {
  readonly kind: AxisKind;
  readonly x: (value: number) => number;
  readonly y: (value: number) => number;
  readonly across: Scale;
  readonly up: Scale;
}

/** The picture of a panel; `words` say what it shows to those who do not see it. */
export function picture(panel: Panel, kind: AxisKind, words: string): SVGElement {
  const curves = panel.kind === 'waves' ? lifted(panel.curves) : panel.curves;
  const frame = frameOf(curves, kind, panel.kind === 'waves' ? waveRange(panel.curves, curves) : null);
  const layers = panel.kind === 'points' ? pointLayers(curves, frame) : lineLayers(curves, frame);
  return svg(
    'svg',
    { viewBox: `0 0 ${WIDTH} ${HEIGHT}`, role: 'img', 'aria-label': words, class: 'qt-Plot' },
    axes(panel.curves[0].xLabel, frame),
    ...layers
  );
}

/** The points that have a place on an axis. */
export function onAxis(points: readonly Point[], kind: AxisKind): readonly Point[] {
  return kind === 'linear' ? points : points.filter(point => point.y > 0);
}

/** Wave functions to one scale, each standing on its energy. */
function lifted(curves: readonly Curve[]): readonly Curve[] {
  const waves = curves.filter(({ style }) => style === 'wave');
  const energies = [...new Set(waves.map(({ baseline }) => baseline))].sort((a, b) => a - b);
  const tallest = most(waves.flatMap(({ points }) => points.map(({ y }) => Math.abs(y)))) || 1;
  const span = (energies.at(-1) ?? 0) - (energies[0] ?? 0);
  const gaps = energies.slice(1).map((energy, i) => energy - (energies[i] ?? 0));
  const closest = gaps.length > 0 ? gaps.reduce((a, b) => Math.min(a, b)) : Math.abs(energies[0] ?? 0);
  // a tunnelling pair must not flatten all the others
  const distance = gaps.length > 0 ? Math.max(closest, span / (2 * energies.length)) : closest;
  const scale = (WAVE_FILL * (distance || 1)) / tallest;
  return curves.map(curve =>
    curve.style === 'wave'
      ? { ...curve, points: curve.points.map(({ x, y }) => ({ x, y: curve.baseline + scale * y, error: null })) }
      : curve
  );
}

/** From the floor of the potential to the top of the highest wave, so that steep walls do not hide the levels. */
function waveRange(given: readonly Curve[], drawn: readonly Curve[]): [number, number] | null {
  const heights = drawn.filter(({ style }) => style === 'wave').flatMap(({ points }) => points.map(({ y }) => y));
  if (heights.length === 0) {
    return null;
  }
  const floor = given.filter(({ style }) => style === 'potential').flatMap(({ points }) => points.map(({ y }) => y));
  return [ends([...floor, ...heights])[0], most(heights)];
}

/** Axes that hold all points, their error bars, the exact line and the fit. */
function frameOf(curves: readonly Curve[], kind: AxisKind, range: [number, number] | null): Frame {
  const seen = curves.flatMap(({ points, exact }) => onAxis([...points, ...exact], kind));
  const fits = curves.flatMap(({ plateau }) => (plateau ? [plateau] : []));
  const heights = [
    ...seen.flatMap(({ y, error }) => [y - (error ?? 0), y + (error ?? 0)]),
    ...fits.flatMap(({ value, error }) => [value - error, value + error])
  ];
  const smallest = kind === 'linear' ? -Infinity : ends(seen.map(({ y }) => y))[0] / 2;
  // an error bar that reaches to zero must not open a logarithmic axis without end
  const [low, high] = range ?? ends(heights.map(height => Math.max(height, smallest)));
  const across = linear(...ends(seen.map(({ x }) => x)), MARKS_ACROSS);
  const room = ROOM * (high - low);
  const up = kind === 'linear' ? linear(low - room, high + room, MARKS_UP) : logarithmic(low, high, MARKS_UP);
  return {
    kind,
    across,
    up,
    x: value => LEFT + GAP + across.place(value) * (WIDTH - LEFT - RIGHT - 2 * GAP),
    y: value => HEIGHT - BOTTOM - up.place(value) * (HEIGHT - TOP - BOTTOM)
  };
}

/** Not by spreading into Math.min: a long run has more points than a call has room for arguments. */
function ends(values: readonly number[]): [number, number] {
  const low = values.reduce((a, b) => Math.min(a, b), Infinity);
  const high = most(values);
  return low <= high ? [low, high] : [0, 1];
}

function most(values: readonly number[]): number {
  return values.reduce((a, b) => Math.max(a, b), -Infinity);
}

function axes(name: string, frame: Frame): SVGElement {
  const base = HEIGHT - BOTTOM + GAP + 2;
  const side = LEFT - 4;
  const right = WIDTH - RIGHT - GAP;
  return svg(
    'g',
    { class: 'qt-Plot-axes' },
    svg('line', { x1: LEFT + GAP, x2: right, y1: base, y2: base }),
    svg('line', { x1: side, x2: side, y1: TOP, y2: HEIGHT - BOTTOM }),
    ...frame.across.ticks.flatMap(tick => {
      const x = frame.x(tick.at);
      return [
        svg('line', { x1: x, x2: x, y1: base, y2: base + 4 }),
        svg('text', { x, y: base + 16, 'text-anchor': 'middle' }, tick.label)
      ];
    }),
    ...frame.up.ticks.flatMap(tick => {
      const y = frame.y(tick.at);
      return [
        svg('line', { x1: side - 4, x2: side, y1: y, y2: y }),
        svg('text', { x: side - 7, y: y + 3.5, 'text-anchor': 'end' }, tick.label)
      ];
    }),
    svg('text', { x: right, y: HEIGHT - 5, 'text-anchor': 'end', class: 'qt-Plot-name' }, name)
  );
}

function pointLayers(curves: readonly Curve[], frame: Frame): SVGElement[] {
  return curves.flatMap(curve => [
    ...(curve.plateau ? fit(curve.plateau, frame) : []),
    ...(curve.exact.length > 0 ? [line(curve.exact, frame, 'qt-Plot-exact')] : []),
    markers(curve.points, frame)
  ]);
}

/** In a window of their own, which cuts off what leaves the frame: the wall of a potential, not its levels. */
function lineLayers(curves: readonly Curve[], frame: Frame): SVGElement[] {
  let series = 0;
  const lines = curves.map(curve => {
    if (curve.style === 'potential') {
      return line(curve.points, frame, 'qt-Plot-potential');
    }
    series += 1;
    return line(curve.points, frame, `qt-Plot-line qt-mod-series${((series - 1) % SERIES) + 1}`);
  });
  const [top, height] = [TOP - 4, HEIGHT - BOTTOM - TOP + 8];
  const window = { x: 0, y: top, width: WIDTH, height, viewBox: `0 ${top} ${WIDTH} ${height}`, overflow: 'hidden' };
  return [svg('svg', window, ...lines)];
}

function fit(plateau: Plateau, frame: Frame): SVGElement[] {
  if (frame.kind === 'logarithmic' && plateau.value <= 0) {
    return [];
  }
  const [left, right] = [frame.x(plateau.from), frame.x(plateau.to)];
  const top = inside(frame.y(plateau.value + plateau.error));
  const bottom = inside(frame.y(plateau.value - plateau.error));
  const middle = frame.y(plateau.value);
  return [
    svg('rect', { class: 'qt-Plot-band', x: left, y: top, width: right - left, height: Math.max(0, bottom - top) }),
    svg('line', { class: 'qt-Plot-fit', x1: left, x2: right, y1: middle, y2: middle })
  ];
}

function markers(points: readonly Point[], frame: Frame): SVGElement {
  const drawn = thinned(onAxis(points, frame.kind), MOST_MARKERS).flatMap(({ x, y, error }) => {
    const at = frame.x(x);
    const marker = svg('circle', { cx: at, cy: frame.y(y), r: 2.1 });
    if (error === null || error === 0) {
      return [marker];
    }
    return [svg('line', { x1: at, x2: at, y1: inside(frame.y(y + error)), y2: inside(frame.y(y - error)) }), marker];
  });
  return svg('g', { class: 'qt-Plot-data' }, ...drawn);
}

function line(points: readonly Point[], frame: Frame, name: string): SVGElement {
  const drawn = envelope(onAxis(points, frame.kind), MOST_BINS).map(({ x, y }) => {
    const height = Math.min(FAR, Math.max(-FAR, frame.y(y)));
    return `${frame.x(x).toFixed(1)},${height.toFixed(1)}`;
  });
  return svg('polyline', { class: name, points: drawn.join(' ') });
}

/** The nearest place within the frame; where a logarithm has no number, its lower end. */
function inside(y: number): number {
  const floor = HEIGHT - BOTTOM + 4;
  return Number.isFinite(y) ? Math.min(floor, Math.max(TOP - 4, y)) : floor;
}
