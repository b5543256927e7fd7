/**
 * What each stretch of an action cell is, for colouring only.
 *
 * A scanner, not a parser: it goes through one line at a time with a small state, so an editor can start it anywhere,
 * and it gives every text some colours. The kernel is what reads the notation and complains about it.
 */

export type Kind =
  | 'magic'
  | 'name'
  | 'option'
  | 'keyword'
  | 'field'
  | 'function'
  | 'symbol'
  | 'setting'
  | 'number'
  | 'derivative'
  | 'operator'
  | 'expectation'
  | 'bracket'
  | 'punctuation'
  | 'comment';

/** What has to be known of the text before a position. Replaced, never changed. */
export interface State {
  /** what the next word belongs to: the magic line, a fresh statement, or the statement begun by this word */
  readonly within: string;
  /** names declared as q(t) so far */
  readonly fields: ReadonlySet<string>;
}

/** One stretch of a line; `kind` is null where nothing is to be coloured. */
export interface Token {
  readonly end: number;
  readonly kind: Kind | null;
  readonly state: State;
}

const MAGIC = 'magic';
const FRESH = 'fresh';
const FIELD = 'field';

export const STATEMENT_WORDS = [
  'metric',
  'lattice',
  'measure',
  'units',
  'periodic',
  'antiperiodic',
  'open',
  'twist',
  'fixed'
] as const;
export const FUNCTIONS = [
  ...['gap', 'mean', 'binder', 'energy', 'charge', 'xi2', 'vol', 'sum_x', 'sum_mu', 'Re', 'Im'],
  ...['sqrt', 'exp', 'log', 'sin', 'cos', 'tan', 'sinh', 'cosh', 'tanh', 'abs', 'tr', 'det']
] as const;

const statementWords: ReadonlySet<string> = new Set(STATEMENT_WORDS);
const functions: ReadonlySet<string> = new Set(FUNCTIONS);
const boundaries: ReadonlySet<string> = new Set(['periodic', 'antiperiodic', 'open', 'twist', 'fixed']);
const fieldWords: ReadonlySet<string> = new Set(['mod', 'complex', 'in', 'su', 'so', 'u', 'pi', 'π']);

const FIRST_LINE = /^%%action(?![\p{L}\p{N}_])/u;
const SPACE = /\s+/y;
const COMMENT = /#.*/y;
const WORD = /[\p{L}_][\p{L}\p{M}\p{Nd}₀-₉_]*/uy; // not ², which is an exponent
const NUMBER = /(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?|[½⅓¼¾⅔⅛]|[⁻⁺]?[⁰¹²³⁴⁵⁶⁷⁸⁹]+/uy;
const DECLARED = /([\p{L}_][\p{L}\p{Nd}₀-₉_]*)(?:\[\d+\])?\(\s*[txyz](?:\s*,\s*[xyz])*\s*\)(?!\s*=)/uy;
const HEAD = /(?:LE|SE|L|H)(?=\s*=)/y;
const DERIVATIVE = /(?:d|∂)(?:[_^](?:\p{L}[\p{L}\p{N}]*|\{[^}]*\})|[ₜₓᵧμν])+|∂|d(?=\s+[\p{L}])|['′″]+/uy;
const OPTION = /--?[\p{L}][\p{L}\p{N}-]*/uy;
const METRIC = /[+-]{2,}|mostly\s+(?:plus|minus)/y;
const TIMES = /[x×](?=\s*\d)/y;
const AVERAGE = /[<⟨]|[>⟩](?:_c(?![\p{L}\p{N}]))?/uy;
const OVERDOTS = /[\u0307\u0308]/gu;

/** Whether a cell is an action cell; `firstLine` may run on, only its beginning matters. */
export function isAction(firstLine: string): boolean {
  return FIRST_LINE.test(firstLine);
}

/** The state before the first letter of a cell. */
export function startState(): State {
  return { within: FRESH, fields: new Set() };
}

/** The state before the first letter of `line`, given the one after the line above. */
export function atLineStart(line: string, state: State): State {
  return { within: isAction(line) ? MAGIC : FRESH, fields: state.fields };
}

/** The stretch of `line` that begins at `from`; it is never empty. */
export function nextToken(line: string, from: number, state: State): Token {
  const here = (pattern: RegExp): string | undefined => {
    pattern.lastIndex = from;
    return pattern.exec(line)?.[0];
  };
  const found = (length: number, kind: Kind | null, next: State = state): Token => ({
    end: from + length,
    kind,
    state: next
  });

  const space = here(SPACE);
  if (space) {
    return found(space.length, null);
  }
  const comment = here(COMMENT);
  if (comment) {
    return found(comment.length, 'comment');
  }
  if (state.within === MAGIC) {
    return magicToken(line, from, state);
  }
  if (line[from] === ';') {
    return found(1, 'punctuation', { within: FRESH, fields: state.fields });
  }
  if (state.within === FRESH) {
    const first = firstOfStatement(line, from, state);
    if (first) {
      return first;
    }
    state = { within: '', fields: state.fields };
  }
  const setting = state.within === 'metric' ? here(METRIC) : undefined;
  if (setting) {
    return found(setting.length, 'setting');
  }
  if (state.within === 'lattice' && here(TIMES)) {
    return found(1, 'operator', state);
  }
  const derivative = here(DERIVATIVE);
  if (derivative) {
    return found(derivative.length, 'derivative', state);
  }
  const word = here(WORD);
  if (word) {
    return found(word.length, kindOfWord(word, state), state);
  }
  const number = here(NUMBER);
  if (number) {
    return found(number.length, 'number', state);
  }
  const average = here(AVERAGE);
  if (average) {
    return found(average.length, 'expectation', state);
  }
  return found(lengthOfLetter(line, from), kindOfSign(line[from] ?? ''), state);
}

function magicToken(line: string, from: number, state: State): Token {
  const rest = line.slice(from);
  const magic = from === 0 ? FIRST_LINE.exec(line) : null;
  if (magic) {
    return { end: magic[0].length, kind: 'magic', state };
  }
  OPTION.lastIndex = from;
  const option = OPTION.exec(line);
  if (option) {
    return { end: from + option[0].length, kind: 'option', state };
  }
  const length = rest.search(/\s|$/);
  return { end: from + Math.max(1, length), kind: 'name', state };
}

/** A declaration, `L =`, or a word such as `measure`; null where a statement begins otherwise. */
function firstOfStatement(line: string, from: number, state: State): Token | null {
  DECLARED.lastIndex = from;
  const declared = DECLARED.exec(line)?.[1];
  if (declared !== undefined) {
    const fields = new Set([...state.fields, declared]);
    return { end: from + declared.length, kind: 'field', state: { within: FIELD, fields } };
  }
  HEAD.lastIndex = from;
  const head = HEAD.exec(line)?.[0];
  if (head !== undefined) {
    return { end: from + head.length, kind: 'keyword', state: { within: head, fields: state.fields } };
  }
  WORD.lastIndex = from;
  const word = WORD.exec(line)?.[0];
  if (word !== undefined && statementWords.has(word)) {
    return { end: from + word.length, kind: 'keyword', state: { within: word, fields: state.fields } };
  }
  return null;
}

function kindOfWord(word: string, state: State): Kind {
  // a dot above is a derivative in print; the letter below it is what the eye looks for
  const bare = word.normalize('NFD').replace(OVERDOTS, '');
  if (state.fields.has(word) || state.fields.has(bare)) {
    return 'field';
  }
  if (state.within === 'units') {
    return 'setting';
  }
  if (state.within === FIELD && fieldWords.has(word)) {
    return 'keyword';
  }
  if (boundaries.has(word) && (state.within === 'lattice' || boundaries.has(state.within))) {
    return 'keyword';
  }
  return functions.has(word) ? 'function' : 'symbol';
}

function kindOfSign(sign: string): Kind | null {
  if ('()[]{}|'.includes(sign)) {
    return 'bracket';
  }
  if (',:.'.includes(sign)) {
    return 'punctuation';
  }
  return '+-*/^=!·√±−×'.includes(sign) ? 'operator' : null;
}

/** A letter beyond the basic plane takes two places, and must not be cut in two. */
function lengthOfLetter(line: string, from: number): number {
  return (line.codePointAt(from) ?? 0) > 0xffff ? 2 : 1;
}
