import assert from 'node:assert/strict';
import { test } from 'node:test';

import { readPayload } from '../lib/payload.js';

const curve = { label: 'C', x: [0, 1, null], y: [1, null, 2], error: [0.1], exact: [1, 0.5] };

test('what is no result is answered with a sentence', () => {
  for (const data of [null, undefined, 3, 'text', [], [1]]) {
    assert.equal(typeof readPayload(data), 'string');
  }
});

test('a format of another number is named and not drawn', () => {
  assert.match(readPayload({ version: 2, rows: [] }), /format 2/);
  assert.match(readPayload({}), /format without a number/);
});

test('missing keys become empty', () => {
  const report = readPayload({ version: 1 });
  assert.equal(report.title, 'result');
  assert.deepEqual([report.rows, report.curves, report.warnings, report.facts, report.couplings], [[], [], [], [], []]);
});

test('entries of another type become empty or null, and the rest is kept', () => {
  const report = readPayload({
    version: 1,
    title: { a: 1 },
    rows: [null, 3, { label: 7, value: 'x', error: NaN, state: null }],
    curves: [{}, curve, 'x'],
    warnings: [1, '', 'words', null],
    facts: [['a'], ['b', 'c'], null],
    couplings: [['w', null], 'x']
  });
  assert.equal(report.rows.length, 1);
  assert.deepEqual([report.rows[0].label, report.rows[0].value, report.rows[0].error], ['7', null, null]);
  assert.equal(report.rows[0].state, 'good');
  assert.equal(report.curves.length, 2);
  assert.deepEqual(report.warnings, ['1', 'words']);
  assert.deepEqual(report.facts, [['b', 'c']]);
  assert.deepEqual(report.couplings, [['w', null]]);
});

test('points that are not numbers are left out and counted', () => {
  const { curves } = readPayload({ version: 1, curves: [curve] });
  assert.deepEqual(curves[0].points, [{ x: 0, y: 1, error: 0.1 }]);
  assert.equal(curves[0].dropped, 2);
  assert.equal(curves[0].exact.length, 2);
});

test('a fit that is not four numbers is no fit', () => {
  const fits = [[1, 0.1, 2, 8], [1, 0.1, 2], [1, null, 2, 8], 'x', null];
  const { curves } = readPayload({ version: 1, curves: fits.map(plateau => ({ plateau })) });
  assert.deepEqual(curves.map(({ plateau }) => plateau !== null), [true, false, false, false, false]);
});

test('what is too much is cut, in words', () => {
  const report = readPayload({ version: 1, rows: Array(5000).fill({}), curves: Array(100).fill({}) });
  assert.equal(report.rows.length, 1000);
  assert.match(report.omissions.join(' '), /4000 more rows.*60 more curves/);
});
