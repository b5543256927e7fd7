import assert from 'node:assert/strict';
import { test } from 'node:test';

import { atLineStart, isAction, nextToken, startState } from '../lib/notation.js';

function scan(text) {
  let state = startState();
  return text.split('\n').map(line => {
    state = atLineStart(line, state);
    const tokens = [];
    for (let at = 0; at < line.length; ) {
      const token = nextToken(line, at, state);
      assert.ok(token.end > at && token.end <= line.length, `no progress at ${at} of ${JSON.stringify(line)}`);
      tokens.push([line.slice(at, token.end), token.kind]);
      at = token.end;
      state = token.state;
    }
    return tokens;
  });
}

/** kinds of the tokens of a line that follows the magic and the declaration of q */
function kinds(line) {
  const found = scan(`%%action test\nq(t)\n${line}`)[2].filter(([text]) => text.trim() !== '');
  return new Map(found);
}

test('only a first line that begins with the magic makes an action', () => {
  assert.ok(isAction('%%action quartic'));
  assert.ok(isAction('%%action'));
  assert.ok(!isAction('%%actions'));
  assert.ok(!isAction(' %%action quartic'));
  assert.ok(!isAction('# %%action'));
});

test('the magic line has a magic, a name and options', () => {
  const [line] = scan('%%action quartic --quiet');
  assert.deepEqual(
    line.filter(([, kind]) => kind),
    [['%%action', 'magic'], ['quartic', 'name'], ['--quiet', 'option']]
  );
});

test('a declared field is known in the lines below', () => {
  const [, declaration, lagrangian] = scan('%%action a\nphi(t, x)\nL = phi psi');
  assert.deepEqual(declaration[0], ['phi', 'field']);
  assert.equal(new Map(lagrangian).get('phi'), 'field');
  assert.equal(new Map(lagrangian).get('psi'), 'symbol');
});

test('components, angles and sources are told apart', () => {
  assert.deepEqual(scan('n[3](t, x), n.n = 1')[0][0], ['n', 'field']);
  const angle = new Map(scan('theta(t) mod 2 pi')[0]);
  assert.equal(angle.get('theta'), 'field');
  assert.equal(angle.get('mod'), 'keyword');
  assert.equal(scan('J(t) = j0 exp(-t^2)')[0][0][1], 'symbol');
  assert.equal(scan('V(r) = k/2 r^2')[0][0][1], 'symbol');
});

test('Lagrangians and Hamiltonians are keywords where they are defined, and only there', () => {
  for (const head of ['L', 'LE', 'H', 'SE']) {
    assert.equal(kinds(`${head} = 1`).get(head), 'keyword');
  }
  assert.equal(kinds('R = L + 1').get('L'), 'symbol');
});

test('each statement word is a keyword at the head of its statement', () => {
  for (const word of ['metric', 'lattice', 'measure', 'units', 'periodic', 'open', 'antiperiodic', 'twist', 'fixed']) {
    assert.equal(kinds(`${word} 1`).get(word), 'keyword');
    assert.equal(kinds(`w = 1; ${word} 1`).get(word), 'keyword');
  }
  assert.equal(kinds('lattice 200, a = 0.1, periodic').get('periodic'), 'keyword');
});

test('derivatives in all their spellings', () => {
  assert.equal(kinds("L = q'^2").get("'"), 'derivative');
  for (const spelling of ['d_t', 'd_mu', 'd^mu', '∂_t', '∂']) {
    assert.equal(kinds(`L = ${spelling} q`).get(spelling), 'derivative');
  }
  assert.equal(kinds('L = (d q)^2').get('d'), 'derivative');
  assert.equal(kinds('L = delta q').get('delta'), 'symbol');
  assert.equal(kinds('L = q̇²').get('q̇'), 'field');
  assert.equal(kinds('L = q²').get('²'), 'number');
});

test('averages, numbers, functions, settings and comments', () => {
  const line = kinds('measure <q^2>_c, gap(q), 1/2, .5, 1e-3 # why');
  assert.equal(line.get('<'), 'expectation');
  assert.equal(line.get('>_c'), 'expectation');
  assert.equal(line.get('gap'), 'function');
  assert.equal(line.get('.5'), 'number');
  assert.equal(line.get('1e-3'), 'number');
  assert.equal(line.get('# why'), 'comment');
  assert.equal(kinds('metric +---').get('+---'), 'setting');
  assert.equal(kinds('units amu, angstrom').get('amu'), 'setting');
  assert.equal(kinds('lattice 64 x 64').get('x'), 'operator');
  assert.equal(kinds('λ = ½').get('½'), 'number');
  assert.equal(kinds('λ = ½').get('λ'), 'symbol');
});

test('any text is covered, token by token', () => {
  const letters = [..."%action qLEH=+-*/^'\"()[]{}<>|,;.#d_t∂φλ½²̇𝜑\t 0123e\\$!~`&"];
  let seed = 7;
  const next = () => (seed = (seed * 1103515245 + 12345) % 2147483648) / 2147483648;
  for (let round = 0; round < 2000; round += 1) {
    const text = Array.from({ length: 40 }, () => letters[Math.floor(next() * letters.length)]).join('');
    const found = scan(`%%action\n${text}`)[1].map(([piece]) => piece).join('');
    assert.equal(found, text);
  }
});

test('a coupling called d with a power is no derivative', () => {
  assert.notEqual(kinds('V = h (q^2/d^2 - 1)^2').get('d'), 'derivative');
  assert.equal(kinds('L = 1/2 d^mu q d_mu q').get('d^mu'), 'derivative');
});
