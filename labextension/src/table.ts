/**
 * The table of a result: one number a line, aligned at the decimal point.
 */

import { formula, html, type Typeset } from './elements.js';
import { count, general, signed, valueWithError, withReason } from './numbers.js';
import type { Row } from './payload.js';

const EXACT_DIGITS = 6;

interface Column {
  readonly head: (Node | string)[];
  readonly meaning: string;
  readonly cell: (row: Row) => string;
}

/** The value as it is printed in a paper, or the word that stands in its place. */
export function printedValue(row: Row): string {
  if (row.state === 'withheld') {
    return 'withheld';
  }
  if (row.value === null) {
    return row.state === 'good' ? 'not a number' : row.state;
  }
  return row.state === 'unresolved' ? withReason(row.value, 'unresolved') : valueWithError(row.value, row.error);
}

/** Only the columns that say something. */
export function resultTable(rows: readonly Row[], typeset: Typeset): HTMLElement {
  const columns = allColumns().filter(column => rows.some(row => column.cell(row) !== ''));
  const remarks = rows.some(row => row.remark !== '');
  const head = html('tr', '', heading(['quantity'], ''));
  head.append(...columns.map(column => heading(column.head, column.meaning)));
  if (remarks) {
    head.append(heading(['remark'], ''));
  }
  const widths = columns.map(column => Math.max(...rows.map(row => splitAtPoint(column.cell(row))[1].length)));
  const body = html('tbody', '');
  for (const row of rows) {
    const label = html('th', 'quantity', formula(row.label, row.latex, typeset));
    label.scope = 'row';
    const line = html('tr', '', label);
    line.append(...columns.map((column, i) => aligned(column.cell(row), widths[i] ?? 0)));
    if (remarks) {
      line.append(html('td', 'remark', row.remark));
    }
    body.append(line);
  }
  const table = html('table', 'table', html('thead', '', head), body);
  if (rows.some(row => row.error !== null)) {
    table.append(html('caption', 'note', 'In brackets: one standard error, in units of the last digits.'));
  }
  return table;
}

function allColumns(): Column[] {
  return [
    { head: ['value'], meaning: 'value and one standard error', cell: printedValue },
    {
      head: ['exact'],
      meaning: 'independent solution at the same lattice spacing',
      cell: row => (row.exact === null ? '' : general(row.exact, EXACT_DIGITS))
    },
    {
      head: ['pull'],
      meaning: '(value \u2212 exact) / error',
      cell: row => (row.pull === null ? '' : signed(row.pull, 1))
    },
    {
      head: ['\u03c4'],
      meaning: 'integrated autocorrelation time, in draws',
      cell: row => (row.tau === null ? '' : valueWithError(row.tau, row.tauError))
    },
    {
      head: ['n', html('sub', '', 'eff')],
      meaning: 'effective number of samples',
      cell: row => (row.nEff === null ? '' : count(row.nEff))
    }
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
