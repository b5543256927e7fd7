/**
 * The figures of a result: which curves share one, what its words say, and the button that changes its axis.
 */

import { formula, html, type Typeset } from './elements.js';
import { valueWithError } from './numbers.js';
import type { Curve } from './payload.js';
import { MOST_MARKERS, onAxis, picture, type AxisKind, type Panel } from './plot.js';

const WIDE_RANGE = 5; // a correlator that falls by less opens on a linear axis

const IN_POTENTIAL = ['wave', 'potential', 'course'];

/** Chains of one history share a figure, and wave functions stand in their potential. */
export function panelsOf(curves: readonly Curve[]): Panel[] {
  const found: Panel[] = [];
  const levels = curves.filter(({ style }) => IN_POTENTIAL.includes(style));
  for (const curve of curves) {
    if (levels.includes(curve)) {
      continue;
    }
    const last = found.at(-1);
    if (curve.style === 'history' && last?.kind === 'history' && last.curves[0].label === curve.label) {
      last.curves.push(curve);
    } else if (curve.style === 'path' && last?.kind === 'paths') {
      last.curves.push(curve);
    } else if (curve.style === 'path') {
      found.push({ kind: 'paths', curves: [curve] });
    } else {
      found.push({ kind: curve.style === 'history' ? 'history' : 'points', curves: [curve] });
    }
  }
  const [first, ...others] = levels;
  if (first) {
    found.push({ kind: 'waves', curves: [first, ...others] });
  }
  return found;
}

/** The figure of a panel, with its caption and, for a correlator, a button for the kind of its axis. */
export function figureOf(panel: Panel, typeset: Typeset): HTMLElement {
  const [first] = panel.curves;
  const title = panel.kind === 'waves' ? html('span', '', 'energy') : formula(first.label, first.latex, typeset);
  const figure = html('figure', 'figure', html('div', 'curveTitle', title));
  if (panel.curves.every(curve => curve.points.length === 0)) {
    figure.append(html('figcaption', 'note', 'This curve holds no numbers.'));
    return figure;
  }
  const canvas = html('div', 'canvas');
  const caption = html('span', '');
  const button = html('button', 'axis');
  let kind: AxisKind = opensLogarithmic(first) ? 'logarithmic' : 'linear';
  const draw = (): void => {
    const words = wordsFor(panel, kind);
    const name = panel.kind === 'waves' ? nameOfWaves(panel) : first.label;
    canvas.replaceChildren(picture(panel, kind, `${name} against ${first.xLabel || 'its argument'}. ${words}`));
    caption.textContent = words;
    button.textContent = kind === 'linear' ? 'logarithmic axis' : 'linear axis';
  };
  button.type = 'button';
  button.dataset['lmSuppressShortcuts'] = 'true'; // Enter and Space are for the button, not for the notebook
  button.addEventListener('click', () => {
    kind = kind === 'linear' ? 'logarithmic' : 'linear';
    draw();
  });
  draw();
  const note = html('figcaption', 'note', caption);
  if (first.style === 'correlator' && first.points.some(point => point.y > 0)) {
    note.append(' ', button);
  }
  figure.append(canvas, note);
  return figure;
}

function nameOfWaves(panel: Panel): string {
  return panel.curves.some(({ style }) => style === 'wave') ? 'wave functions' : 'the potential';
}

function opensLogarithmic(curve: Curve): boolean {
  const low = curve.points.reduce((least, point) => Math.min(least, point.y), Infinity);
  const high = curve.points.reduce((most, point) => Math.max(most, point.y), -Infinity);
  return curve.style === 'correlator' && low > 0 && high > WIDE_RANGE * low;
}

/** What each shape in the picture is, and what is missing from it. */
function wordsFor(panel: Panel, kind: AxisKind): string {
  const [first] = panel.curves;
  const parts: string[] = [];
  if (panel.kind === 'points') {
    parts.push(...wordsForPoints(first, kind));
  } else if (panel.kind === 'waves') {
    const waves = panel.curves.filter(({ style }) => style === 'wave').map(({ label }) => label);
    if (waves.length > 0) {
      parts.push(`Wave functions, each on its energy: ${waves.join(', ')}. Thick line: potential.`);
    } else {
      parts.push('Thick line: potential. Line upon it: the part that the path passes.');
    }
  } else if (panel.kind === 'paths') {
    parts.push(`Lines: ${panel.curves.map(({ label }) => label).join(', ')}.`);
  } else if (panel.curves.length > 1) {
    parts.push(`${panel.curves.length} chains.`);
  }
  const dropped = panel.curves.reduce((sum, curve) => sum + curve.dropped, 0);
  if (dropped > 0) {
    parts.push(`${dropped} entries are left out: not numbers, or too large to draw.`);
  }
  return parts.join(' ');
}

function wordsForPoints(curve: Curve, kind: AxisKind): string[] {
  const shown = onAxis(curve.points, kind).length;
  const hidden = curve.points.length - shown;
  const bars = curve.points.some(point => point.error !== null);
  const parts = [bars ? 'Points: value and one standard error.' : 'Points: values, without errors.'];
  if (shown > MOST_MARKERS) {
    parts.push(`${MOST_MARKERS} of ${shown} points are drawn.`);
  }
  if (curve.exact.length > 0) {
    parts.push('Line: exact.');
  }
  if (curve.plateau) {
    const { value, error, from, to } = curve.plateau;
    parts.push(`Band: fit from ${Number(from.toPrecision(4))} to ${Number(to.toPrecision(4))}, ${valueWithError(value, error)}.`);
  }
  if (hidden > 0) {
    parts.push(`${hidden} values that are not positive have no place on this axis.`);
  }
  return parts;
}
