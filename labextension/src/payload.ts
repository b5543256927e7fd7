/**
 * The vendor JSON of a result, read with suspicion.
 *
 * A saved notebook can hold anything, so nothing is taken for granted: what is missing or of another type becomes empty,
 * what is not a finite number becomes null, and what remains is a `Report` that can be drawn without further checks. The
 * other end is `Report.payload()` in the Python half.
 */

export const RESULT_MIME = 'application/vnd.quarterturn.result+json';
export const PAYLOAD_VERSION = 1;

const MOST_ROWS = 1000;
const MOST_CURVES = 40;
const LARGEST_DRAWN = 1e150; // so that no difference or square on the way to the page overflows
const MOST_WORDS = 200; // warnings, facts, couplings: more of them nobody reads

export interface Row {
  readonly label: string;
  readonly latex: string;
  readonly value: number | null;
  readonly error: number | null;
  readonly exact: number | null;
  readonly pull: number | null;
  readonly tau: number | null;
  readonly tauError: number | null;
  readonly nEff: number | null;
  readonly state: string;
  readonly remark: string;
  readonly unit: string;
}

export interface Point {
  readonly x: number;
  readonly y: number;
  readonly error: number | null;
}

export interface Plateau {
  readonly value: number;
  readonly error: number;
  readonly from: number;
  readonly to: number;
}

export interface Curve {
  readonly label: string;
  readonly latex: string;
  readonly xLabel: string;
  readonly points: readonly Point[];
  readonly exact: readonly Point[];
  /** how many of the points given were not numbers, or beyond LARGEST_DRAWN */
  readonly dropped: number;
  readonly style: string;
  readonly plateau: Plateau | null;
  /** of a wave function: the energy that it is drawn on */
  readonly baseline: number;
}

export interface Report {
  readonly title: string;
  readonly actionText: string;
  readonly latex: string;
  readonly couplings: readonly (readonly [string, number | null])[];
  readonly rows: readonly Row[];
  readonly curves: readonly Curve[];
  readonly warnings: readonly string[];
  readonly facts: readonly (readonly [string, string])[];
  readonly recordName: string;
  /** sentences about what is not drawn */
  readonly omissions: readonly string[];
}

/** The report, or a sentence that says why there is none. */
export function readPayload(data: unknown): Report | string {
  if (!isRecord(data)) {
    return 'This output is marked as a quarterturn result but holds none.';
  }
  if (data['version'] !== PAYLOAD_VERSION) {
    return (
      `This result was saved in format ${text(data['version']) || 'without a number'}, and this extension draws ` +
      `format ${PAYLOAD_VERSION}. Install matching versions of quarterturn for the kernel and for JupyterLab.`
    );
  }
  const rows = list(data['rows']).filter(isRecord);
  const curves = list(data['curves']).filter(isRecord);
  return {
    title: text(data['title']) || 'result',
    actionText: text(data['action_text']),
    latex: text(data['latex']),
    couplings: pairs(data['couplings']).map(([name, value]) => [text(name), number(value)]),
    rows: rows.slice(0, MOST_ROWS).map(readRow),
    curves: curves.slice(0, MOST_CURVES).map(readCurve),
    warnings: list(data['warnings']).map(text).filter(Boolean).slice(0, MOST_WORDS),
    facts: pairs(data['facts']).map(([name, value]) => [text(name), text(value)]),
    recordName: text(data['record_name']),
    omissions: [
      ...omitted(rows.length, MOST_ROWS, 'rows'),
      ...omitted(curves.length, MOST_CURVES, 'curves')
    ]
  };
}

function readRow(row: Record<string, unknown>): Row {
  return {
    label: text(row['label']),
    latex: text(row['latex']),
    value: number(row['value']),
    error: number(row['error']),
    exact: number(row['exact']),
    pull: number(row['pull']),
    tau: number(row['tau']),
    tauError: number(row['tau_error']),
    nEff: number(row['n_eff']),
    state: text(row['state']) || 'good',
    remark: text(row['remark']),
    unit: text(row['unit'])
  };
}

function readCurve(curve: Record<string, unknown>): Curve {
  const x = list(curve['x']);
  const y = list(curve['y']);
  const points = zip(x, y, list(curve['error']));
  return {
    label: text(curve['label']),
    latex: text(curve['latex']),
    xLabel: text(curve['x_label']),
    points,
    exact: zip(x, list(curve['exact']), []),
    dropped: Math.max(x.length, y.length) - points.length,
    style: text(curve['style']) || 'correlator',
    plateau: readPlateau(curve['plateau']),
    baseline: number(curve['baseline']) ?? 0
  };
}

/** The points that have a place in a picture. */
function zip(x: readonly unknown[], y: readonly unknown[], error: readonly unknown[]): Point[] {
  const points: Point[] = [];
  for (let i = 0; i < Math.min(x.length, y.length); i += 1) {
    const at = number(x[i]);
    const value = number(y[i]);
    const size = Math.abs(number(error[i]) ?? 0);
    if (at !== null && value !== null && Math.max(Math.abs(at), Math.abs(value), size) < LARGEST_DRAWN) {
      points.push({ x: at, y: value, error: number(error[i]) === null ? null : size });
    }
  }
  return points;
}

function readPlateau(data: unknown): Plateau | null {
  const [value, error, from, to] = list(data).map(number);
  if (value == null || error == null || from == null || to == null) {
    return null;
  }
  if (Math.max(Math.abs(value), Math.abs(error)) >= LARGEST_DRAWN) {
    return null;
  }
  return { value, error: Math.abs(error), from: Math.min(from, to), to: Math.max(from, to) };
}

function omitted(given: number, most: number, what: string): string[] {
  return given > most ? [`${given - most} more ${what} are in the result and not drawn here.`] : [];
}

function isRecord(data: unknown): data is Record<string, unknown> {
  return typeof data === 'object' && data !== null && !Array.isArray(data);
}

function list(data: unknown): readonly unknown[] {
  return Array.isArray(data) ? data : [];
}

function pairs(data: unknown): readonly (readonly [unknown, unknown])[] {
  return list(data)
    .filter((item): item is [unknown, unknown] => Array.isArray(item) && item.length >= 2)
    .slice(0, MOST_WORDS);
}

function text(data: unknown): string {
  return typeof data === 'string' ? data : typeof data === 'number' ? String(data) : '';
}

function number(data: unknown): number | null {
  return typeof data === 'number' && Number.isFinite(data) ? data : null;
}
