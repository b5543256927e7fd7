/**
 * From numbers to places on an axis, and the round numbers that are written along it.
 */

export interface Tick {
  readonly at: number;
  readonly label: string;
}

export interface Scale {
  /** where a number stands between the two ends of the axis; outside of [0, 1] where it is off it */
  readonly place: (value: number) => number;
  readonly ticks: readonly Tick[];
}

const ROUND_STEPS = [1, 2, 2.5, 5, 10];
const WIDE_RATIO = 30; // from here on, powers of ten alone are enough marks for a logarithmic axis

/** A linear axis from `low` to `high`; where they are equal it is opened up around them. */
export function linear(low: number, high: number, marks: number): Scale {
  const [from, to] = opened(low, high);
  const step = roundStep((to - from) / Math.max(1, marks));
  const ticks: Tick[] = [];
  const first = Math.ceil(from / step - 1e-9);
  for (let i = first; i <= first + 2 * marks && i * step <= to + 1e-9 * step; i += 1) {
    ticks.push({ at: i * step, label: tickLabel(i * step, step) });
  }
  return { place: value => (value - from) / (to - from), ticks };
}

/** A logarithmic axis between two positive numbers. */
export function logarithmic(low: number, high: number, marks: number): Scale {
  const [from, to] = low < high ? [low, high] : [low / 2, high * 2];
  const a = Math.log10(from);
  const b = Math.log10(to);
  const leads = to / from >= WIDE_RATIO ? [1] : [1, 2, 5];
  const stride = Math.max(1, Math.ceil((b - a) / Math.max(1, marks)));
  const ticks: Tick[] = [];
  for (let power = Math.floor(a); power <= Math.ceil(b); power += 1) {
    for (const lead of leads) {
      const at = lead * 10 ** power;
      if (power % stride === 0 && at >= from * 0.999 && at <= to * 1.001) {
        ticks.push({ at, label: decadeLabel(lead, power) });
      }
    }
  }
  if (ticks.length < 2) {
    return { place: value => (Math.log10(value) - a) / (b - a), ticks: linear(from, to, marks).ticks };
  }
  return { place: value => (Math.log10(value) - a) / (b - a), ticks };
}

/** Evenly spread members of a long list, both ends included. */
export function thinned<T>(items: readonly T[], most: number): readonly T[] {
  if (items.length <= most) {
    return items;
  }
  const stride = (items.length - 1) / (most - 1);
  return Array.from({ length: most }, (_, i) => items[Math.round(i * stride)] as T);
}

/** The lowest and highest member of each of `bins` stretches of a long list, so that no excursion is lost. */
export function envelope<T extends { readonly y: number }>(items: readonly T[], bins: number): readonly T[] {
  if (items.length <= 2 * bins) {
    return items;
  }
  const kept: T[] = [];
  for (let bin = 0; bin < bins; bin += 1) {
    const from = Math.floor((bin * items.length) / bins);
    const to = Math.floor(((bin + 1) * items.length) / bins);
    let low = from;
    let high = from;
    for (let i = from; i < to; i += 1) {
      low = (items[i] as T).y < (items[low] as T).y ? i : low;
      high = (items[i] as T).y > (items[high] as T).y ? i : high;
    }
    kept.push(items[Math.min(low, high)] as T);
    if (low !== high) {
      kept.push(items[Math.max(low, high)] as T);
    }
  }
  return kept;
}

function opened(low: number, high: number): [number, number] {
  if (high - low > 1e-12 * Math.max(Math.abs(low), Math.abs(high))) {
    return [low, high];
  }
  const room = Math.abs(low) > 0 ? 0.1 * Math.abs(low) : 1;
  return [low - room, high + room];
}

function roundStep(wanted: number): number {
  const unit = 10 ** Math.floor(Math.log10(wanted));
  return unit * (ROUND_STEPS.find(step => step * unit >= wanted * 0.999) ?? 10);
}

function tickLabel(value: number, step: number): string {
  const size = Math.abs(value);
  if (size < step * 1e-6) {
    return '0';
  }
  if (size >= 1e6 || step < 1e-4) {
    return minus(value.toExponential(Math.min(6, Math.max(0, digitsBetween(size, step)))).replace('e+', 'e'));
  }
  const decimals = Math.max(0, -Math.floor(Math.log10(step) + 1e-9));
  const needed = Number.isInteger(Number((step * 10 ** decimals).toFixed(6))) ? decimals : decimals + 1;
  return minus(value.toFixed(Math.min(needed, 8)));
}

function digitsBetween(size: number, step: number): number {
  return Math.floor(Math.log10(size)) - Math.floor(Math.log10(step) + 1e-9);
}

function decadeLabel(lead: number, power: number): string {
  if (power >= -3 && power <= 3) {
    return minus((lead * 10 ** power).toFixed(Math.max(0, -power)));
  }
  const raised = String(power).replace(/./g, letter => '⁻⁰¹²³⁴⁵⁶⁷⁸⁹'['-0123456789'.indexOf(letter)] ?? letter);
  return lead === 1 ? `10${raised}` : `${lead}·10${raised}`;
}

function minus(text: string): string {
  return text.replace(/-/g, '\u2212');
}
