import assert from 'node:assert/strict';
import { test } from 'node:test';

import { count, general, signed, valueWithError, withReason } from '../lib/numbers.js';

test('a value carries two digits of its error in brackets', () => {
  assert.equal(valueWithError(0.30579, 0.0012), '0.3058(12)');
  assert.equal(valueWithError(-0.30579, 0.0012), '-0.3058(12)');
  assert.equal(valueWithError(12.34, 4.5), '12.3(4.5)');
  assert.equal(valueWithError(1234, 56), '1234(56)');
  assert.equal(valueWithError(1.2341e-7, 5.6e-9), '1.234(56)e-07');
  assert.equal(valueWithError(0, 0.25), '0.00(25)');
});

test('an error that rounds up to a third digit takes a place less', () => {
  assert.equal(valueWithError(0.5, 0.0996), '0.50(10)');
});

test('a value that rounds to zero has no sign', () => {
  assert.equal(valueWithError(-0.0001, 0.12), '0.00(12)');
});

test('ties go to the even digit', () => {
  assert.equal(valueWithError(0.125, 0.12), '0.12(12)');
  assert.equal(valueWithError(0.135, 0.12), '0.14(12)');
});

test('an error that is missing, zero or no number is told apart', () => {
  assert.equal(valueWithError(0.305814159, null), '0.305814');
  assert.equal(valueWithError(0.305814159, 0), '0.305814(0)');
  assert.equal(valueWithError(0.305814159, Infinity), '0.3058(inf)');
  assert.equal(valueWithError(NaN, 0.1), 'nan');
  assert.equal(withReason(0.305814159, 'unresolved'), '0.3058(unresolved)');
});

test('plain values shed trailing zeros and take an exponent only where they must', () => {
  assert.equal(general(1, 6), '1');
  assert.equal(general(0.1, 6), '0.1');
  assert.equal(general(100000, 6), '100000');
  assert.equal(general(1000000, 6), '1e+06');
  assert.equal(general(0.00001234, 6), '1.234e-05');
  assert.equal(general(999999.5, 6), '1e+06');
});

test('pulls have a sign and counts have gaps', () => {
  assert.equal(signed(0.42, 1), '+0.4');
  assert.equal(signed(-1.26, 1), '-1.3');
  assert.equal(signed(-0.02, 1), '0.0');
  assert.equal(count(12345.6), '12\u202f346');
  assert.equal(count(99), '99');
});
