/**
 * The table of a result: one number a line, aligned at the decimal point.
 */

import { formula, html, type Typeset } from './elements.js';
import { autocorrelation, count, exactValue, signed, valueWithError, withReason } from './numbers.js';
import type { Row } from './payload.js';

interface Column {
  readonly name: keyof Omit<Cells, 'remark'>;
  readonly head: (Node | string)[];
  readonly meaning: string;
}

/** A row in words and digits, empty where there is nothing to say; the Python half prints the same. */
export interface Cells {
  readonly value: string;
  readonly unit: string;
  readonly exact: string;
  readonly pull: string;
  readonly tau: string;
  readonly nEff: string;
  readonly remark: string;
}

/** A number comes with its error or with words in the error's place; a withheld one is not shown at all. */
export function cellsOf(row: Row): Cells {
  if (row.state === 'withheld' || row.value === null) {
    const remark = row.remark || 'no finite number came out';
    return { value: 'withheld', unit: '', exact: '', pull: '', tau: '', nEff: '', remark };
  }
  const resolved = row.state === 'good';
  return {
    value: resolved ? valueWithError(row.value, row.error) : withReason(row.value, row.state),
    unit: row.unit,
    exact: row.exact === null ? '' : exactValue(row.exact, resolved ? row.error : null),
    pull: row.pull === null || !resolved ? '' : signed(row.pull, 1),
    tau: row.tau === null ? '' : autocorrelation(row.tau, row.tauError),
    nEff: row.nEff === null ? '' : count(row.nEff),
    remark: row.remark
  };
}

/** Only the columns that say something. */
export function resultTable(rows: readonly Row[], typeset: Typeset): HTMLElement {
  const lines = rows.map(cellsOf);
  const columns = allColumns().filter(({ name }) => name === 'value' || lines.some(line => line[name] !== ''));
  const remarks = lines.some(line => line.remark !== '');
  const head = html('tr', '', heading(['observable'], ''));
  head.append(...columns.map(column => heading(column.head, column.meaning)));
  if (remarks) {
    head.append(heading(['remark'], ''));
  }
  const widths = columns.map(({ name }) => Math.max(...lines.map(line => splitAtPoint(line[name])[1].length)));
  const body = html('tbody', '');
  rows.forEach((row, i) => {
    const cells = lines[i] ?? cellsOf(row);
    const label = html('th', 'label', formula(row.label, row.latex, typeset));
    label.scope = 'row';
    const parts = columns.map(({ name }, k) =>
      name === 'unit' ? html('td', 'unit', cells.unit) : aligned(cells[name], widths[k] ?? 0)
    );
    const line = html('tr', '', label, ...parts);
    if (remarks) {
      line.append(html('td', 'remark', cells.remark));
    }
    body.append(line);
  });
  const table = html('table', 'table', html('thead', '', head), body);
  if (rows.some(row => row.error !== null)) {
    table.append(html('caption', 'note', 'In brackets: one standard error, in units of the last digits.'));
  }
  return table;
}

function allColumns(): Column[] {
  return [
    { name: 'value', head: ['value'], meaning: 'value and one standard error' },
    { name: 'unit', head: ['unit'], meaning: 'of value, error and exact' },
    { name: 'exact', head: ['exact'], meaning: 'independent solution at the same lattice spacing' },
    { name: 'pull', head: ['pull'], meaning: '(value \u2212 exact) / error' },
    { name: 'tau', head: ['\u03c4'], meaning: 'integrated autocorrelation time, in draws' },
    { name: 'nEff', head: ['n', html('sub', '', 'eff')], meaning: 'effective number of samples' }
  ];
}

function heading(content: (Node | string)[], meaning: string): HTMLElement {
  const cell = html('th', 'heading', ...content);
  cell.scope = 'col';
  if (meaning) {
    cell.title = meaning;
  }
  return cell;
}

/** Sign, digits before the decimal point, and the rest. */
export function splitAtPoint(text: string): [string, string, string] {
  const [start = '', sign = '', whole = ''] = /^([-+]?)([\d\u202f]+)/.exec(text) ?? [];
  return [sign, whole, text.slice(start.length)];
}

/** Digits right-aligned before the point; the sign hangs to their left, since it is not as wide as a digit. */
function aligned(text: string, width: number): HTMLElement {
  const [sign, whole, rest] = splitAtPoint(text);
  const digits = html('span', 'digits', html('span', 'sign', sign.replace('-', '\u2212')), whole);
  const left = html('span', 'whole', digits);
  left.style.minWidth = `${width}ch`;
  return html('td', 'number', left, html('span', whole === '' ? 'word' : '', rest));
}
