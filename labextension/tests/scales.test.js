import assert from 'node:assert/strict';
import { test } from 'node:test';

import { envelope, linear, logarithmic, thinned } from '../lib/scales.js';

const labels = scale => scale.ticks.map(tick => tick.label);

test('linear marks are round, inside the axis, and written with the digits they need', () => {
  assert.deepEqual(labels(linear(0, 10, 5)), ['0', '2', '4', '6', '8', '10']);
  assert.deepEqual(labels(linear(-0.31, 0.22, 5)), ['−0.2', '0', '0.2']);
  assert.deepEqual(labels(linear(0, 1, 4)), ['0', '0.25', '0.50', '0.75', '1.00']);
  assert.deepEqual(labels(linear(1e-7, 3e-7, 2)), ['1e−7', '2e−7', '3e−7']);
});

test('logarithmic marks are powers of ten, or their 1, 2, 5 on a short axis', () => {
  assert.deepEqual(labels(logarithmic(0.001, 1, 5)), ['0.001', '0.01', '0.1', '1']);
  assert.deepEqual(labels(logarithmic(0.9, 11, 5)), ['1', '2', '5', '10']);
  assert.deepEqual(labels(logarithmic(1e-8, 1e-5, 5)), ['10⁻⁸', '10⁻⁷', '10⁻⁶', '10⁻⁵']);
});

test('the ends of an axis are its ends', () => {
  for (const scale of [linear(2, 8, 5), logarithmic(2, 8, 5)]) {
    assert.ok(Math.abs(scale.place(2)) < 1e-12 && Math.abs(scale.place(8) - 1) < 1e-12);
  }
});

test('an axis of one value, of zero, or of the widest range is still an axis', () => {
  const extremes = [
    linear(0, 0, 5),
    linear(3, 3, 5),
    linear(-1e300, 1e300, 5),
    linear(1, 1 + 1e-15, 5),
    logarithmic(5, 5, 5),
    logarithmic(1e-300, 1e300, 5)
  ];
  for (const scale of extremes) {
    assert.ok(scale.ticks.length >= 1 && scale.ticks.length <= 20, JSON.stringify(labels(scale)));
    assert.ok(scale.ticks.every(({ at }) => Number.isFinite(scale.place(at))));
  }
});

test('thinning keeps both ends, and an envelope keeps the extremes', () => {
  const items = Array.from({ length: 10_000 }, (_, i) => ({ y: i === 4321 ? 99 : i === 7654 ? -99 : i % 7 }));
  const few = thinned(items, 100);
  assert.deepEqual([few.length, few[0], few[99]], [100, items[0], items[9999]]);
  const shown = envelope(items, 50);
  assert.ok(shown.length <= 100 && shown.includes(items[4321]) && shown.includes(items[7654]));
});
