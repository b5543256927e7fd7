import assert from 'node:assert/strict';
import { test } from 'node:test';

import { figureOf, panelsOf } from '../lib/figure.js';
import { readPayload } from '../lib/payload.js';
import { resultTable } from '../lib/table.js';

/** As much of a page as the drawing needs; every attribute that is set is checked to be a number or a word. */
class Element {
  constructor(tag) {
    Object.assign(this, { tag, children: [], style: {}, dataset: {}, attributes: {}, textContent: '' });
  }
  append(...children) {
    this.children.push(...children);
  }
  replaceChildren(...children) {
    this.children = children;
  }
  addEventListener(_name, listener) {
    this.listener = listener;
  }
  setAttribute(name, value) {
    assert.ok(!/NaN|Infinity|undefined/.test(value), `${this.tag} ${name}="${value}"`);
    this.attributes[name] = value;
  }
}
globalThis.document = {
  createElement: tag => new Element(tag),
  createElementNS: (_space, tag) => new Element(tag)
};

const typeset = async () => false;
const all = (element, tag) =>
  [element, ...(element.children ?? []).flatMap(child => (child.children ? all(child, tag) : []))].filter(
    (found, i, list) => found.tag === tag && list.indexOf(found) === i
  );

function draw(payload) {
  const report = readPayload({ version: 1, ...payload });
  const figures = panelsOf(report.curves).map(panel => figureOf(panel, typeset));
  for (const button of figures.flatMap(figure => all(figure, 'button'))) {
    button.listener?.();
    button.listener?.();
  }
  return { figures, table: resultTable(report.rows, typeset) };
}

test('points become markers with bars, and a fit becomes a band', () => {
  const { figures } = draw({
    curves: [{ label: 'c', x: [0, 1, 2], y: [4, 2, 1], error: [0.1, 0.1, 2], exact: [4, 2, 1], plateau: [1, 0.1, 1, 2] }]
  });
  assert.equal(figures.length, 1);
  assert.equal(all(figures[0], 'circle').length, 3);
  assert.equal(all(figures[0], 'rect').length, 1);
  assert.equal(all(figures[0], 'polyline').length, 1);
});

test('chains of one history share a figure, and so do waves and their potential', () => {
  const history = { label: 'h', style: 'history', x: [0, 1], y: [0, 1] };
  const wave = { label: 'w', style: 'wave', x: [0, 1], y: [0, 1], baseline: 0.5 };
  const { figures } = draw({ curves: [wave, history, history, { ...wave, style: 'potential' }, wave] });
  assert.deepEqual(figures.map(figure => all(figure, 'polyline').length), [2, 3]);
});

test('paths share a figure, and the potential carries the part that they pass', () => {
  const path = { label: 'x(t)', style: 'path', x: [0, 1], y: [1, 2] };
  const potential = { label: 'V', style: 'potential', x: [0, 1, 2], y: [1, 0, 1] };
  const { figures } = draw({ curves: [path, { ...path, label: 'y(t)' }, potential, { ...potential, style: 'course' }] });
  assert.deepEqual(figures.map(figure => all(figure, 'polyline').length), [2, 2]);
  assert.deepEqual(figures.map(figure => all(figure, 'button').length), [0, 0]);
});

test('a logarithmic axis is offered for correlators with something above zero', () => {
  const buttons = curve => all(draw({ curves: [{ x: [0, 1], ...curve }] }).figures[0], 'button').length;
  assert.equal(buttons({ y: [1, 0.5] }), 1);
  assert.equal(buttons({ y: [-1, -0.5] }), 0);
  assert.equal(buttons({ y: [1, 0.5], style: 'gap' }), 0);
});

test('anything at all can be drawn without an error and without a place that is no number', () => {
  let seed = 11;
  const next = () => (seed = (seed * 1103515245 + 12345) % 2147483648) / 2147483648;
  const pick = list => list[Math.floor(next() * list.length)];
  const odd = () => pick([0, -0, 1, -1, 1e-300, -1e-300, 1e300, 1e149, -1e149, 0.1, NaN, null, 'x', {}, [], next()]);
  const many = () => pick([[], null, Array.from({ length: Math.floor(next() * 8) }, odd)]);
  for (let round = 0; round < 3000; round += 1) {
    const curves = Array.from({ length: 3 }, () => ({
      ...{ label: 'c', x_label: 't', x: many(), y: many(), error: many(), exact: many() },
      style: pick(['correlator', 'gap', 'history', 'wave', 'potential', 'other', null]),
      plateau: pick([null, many(), [odd(), odd(), odd(), odd()]]),
      baseline: odd()
    }));
    const row = () => ({ value: odd(), error: odd(), exact: odd(), pull: odd(), tau: odd(), tau_error: odd(), n_eff: odd() });
    draw({ curves, rows: [row(), { ...row(), state: pick(['unresolved', 'withheld', 'odd', 3]) }] });
  }
});
