/**
 * Numbers as they stand in a paper, 0.3058(12), digit for digit as the Python half prints them.
 *
 * In exact decimal arithmetic on the digits of the float, ties to even, so that both halves agree at either end of the
 * range. What cannot be a number comes back as words.
 */

const ERROR_DIGITS = 2;
const PLAIN_DIGITS = 6; // of a value without an error
const UNRESOLVED_DIGITS = 4; // of a value whose error is not known
const SMALLEST_PLAIN = -4; // powers of ten between which no exponent is written
const LARGEST_PLAIN = 6;
const GUARD_DIGITS = 1; // of an exact value, beyond the last digit of the measured one
const MOST_DIGITS = 12;
const ALONE_DIGITS = 8; // of an exact value beside no error
const EXACT_DIGITS = 100; // as many as the language gives; a tie is decided long before

/** mantissa times ten to the power exponent */
interface Decimal {
  readonly mantissa: bigint;
  readonly exponent: number;
}

/** 0.3058(12): a value and its one-sigma error; an error of null leaves the value alone. */
export function valueWithError(value: number, error: number | null): string {
  if (!Number.isFinite(value)) {
    return words(value);
  }
  if (error === null) {
    return general(value, PLAIN_DIGITS);
  }
  if (error === 0) {
    return `${general(value, PLAIN_DIGITS)}(0)`;
  }
  if (!Number.isFinite(error)) {
    return withReason(value, words(error));
  }
  const size = Math.abs(error);
  const power = powerOfTen(Math.max(Math.abs(value), size), ERROR_DIGITS);
  if (SMALLEST_PLAIN <= power && power < LARGEST_PLAIN) {
    return plain(value, size, 0);
  }
  return `${plain(value, size, power)}e${exponentDigits(power)}`;
}

/** 0.3058(unresolved): a value with a word in the place of its error. */
export function withReason(value: number, reason: string): string {
  return `${general(value, UNRESOLVED_DIGITS)}(${reason})`;
}

/** An independent value, to one digit more than a value with this error is printed. */
export function exactValue(exact: number, error: number | null): string {
  if (!error || exact === 0 || !Number.isFinite(exact) || !Number.isFinite(error)) {
    return general(exact, ALONE_DIGITS);
  }
  const last = Math.floor(Math.log10(Math.abs(error))) - 1 - GUARD_DIGITS;
  const power = Math.floor(Math.log10(Math.abs(exact)));
  const size = Math.max(power, last + 2);
  if (SMALLEST_PLAIN <= size && size < LARGEST_PLAIN) {
    const decimals = Math.max(0, Math.min(-last, MOST_DIGITS - Math.max(power, 0)));
    return fixed(decimal(exact.toExponential(EXACT_DIGITS)), decimals);
  }
  return scientific(exact, Math.min(Math.max(power - last, 0), MOST_DIGITS));
}

/** An integrated autocorrelation time, with its error where there is one. */
export function autocorrelation(tau: number, error: number | null): string {
  if (error !== null && error !== 0) {
    return valueWithError(tau, error);
  }
  return tau < 100 ? general(tau, 2) : fixed(decimal(tau.toExponential(EXACT_DIGITS)), 0);
}

/** `value` in `digits` significant digits, without trailing zeros; an exponent only where it has to be. */
export function general(value: number, digits: number): string {
  if (!Number.isFinite(value)) {
    return words(value);
  }
  if (value === 0) {
    return Object.is(value, -0) ? '-0' : '0';
  }
  const exact = decimal(value.toExponential(EXACT_DIGITS));
  const power = roundedPower(exact, digits);
  const short = (text: string): string => (text.includes('.') ? text.replace(/\.?0+$/, '') : text);
  if (power < SMALLEST_PLAIN || power >= digits) {
    return `${short(fixed(shifted(exact, -power), digits - 1))}e${exponentDigits(power)}`;
  }
  return short(fixed(exact, digits - 1 - power));
}

function scientific(value: number, decimals: number): string {
  const exact = decimal(value.toExponential(EXACT_DIGITS));
  const power = roundedPower(exact, decimals + 1);
  return `${fixed(shifted(exact, -power), decimals)}e${exponentDigits(power)}`;
}

/** `value` with so many decimals and always with its sign, +0.4, unless that rounds to zero. */
export function signed(value: number, decimals: number): string {
  if (!Number.isFinite(value)) {
    return words(value);
  }
  const text = fixed(decimal(String(Math.abs(value))), decimals);
  return /[1-9]/.test(text) ? `${value < 0 ? '-' : '+'}${text}` : text;
}

/** A whole number, thousands apart: 12 340; a large one with an exponent. */
export function count(value: number): string {
  if (!Number.isFinite(value) || Math.abs(value) >= 1e9) {
    return general(value, 3);
  }
  return String(Math.round(value)).replace(/\B(?=(\d{3})+$)/g, '\u202f');
}

function words(value: number): string {
  return Number.isNaN(value) ? 'nan' : value > 0 ? 'inf' : '-inf';
}

function plain(value: number, error: number, shift: number): string {
  const decimals = ERROR_DIGITS - 1 - powerOfTen(error, ERROR_DIGITS) + shift;
  const shown = fixed(shifted(decimal(String(value)), -shift), decimals);
  const bracket = fixed(shifted(decimal(String(error)), -shift), decimals);
  const digits = decimals >= ERROR_DIGITS ? bracket.replace('.', '').replace(/^0+(?=\d)/, '') : bracket;
  return `${/^-[0.]+$/.test(shown) ? shown.slice(1) : shown}(${digits})`;
}

function exponentDigits(power: number): string {
  return `${power < 0 ? '-' : '+'}${String(Math.abs(power)).padStart(2, '0')}`;
}

function decimal(text: string): Decimal {
  const [digits = '0', power = '0'] = text.split('e');
  const point = digits.indexOf('.');
  const decimals = point < 0 ? 0 : digits.length - point - 1;
  return { mantissa: BigInt(digits.replace('.', '')), exponent: Number(power) - decimals };
}

function shifted(number: Decimal, power: number): Decimal {
  return { mantissa: number.mantissa, exponent: number.exponent + power };
}

/** The integer nearest to the number times ten to the power `decimals`, ties to even. */
function rounded(number: Decimal, decimals: number): bigint {
  const power = number.exponent + decimals;
  if (power >= 0) {
    return number.mantissa * 10n ** BigInt(power);
  }
  const unit = 10n ** BigInt(-power);
  const size = number.mantissa < 0n ? -number.mantissa : number.mantissa;
  const whole = size / unit;
  const twice = 2n * (size - whole * unit);
  const up = twice > unit || (twice === unit && whole % 2n === 1n);
  const result = up ? whole + 1n : whole;
  return number.mantissa < 0n ? -result : result;
}

/** The number with `decimals` decimals; where that is negative, rounded to tens, hundreds and so on. */
function fixed(number: Decimal, decimals: number): string {
  const scaled = rounded(number, decimals);
  if (decimals <= 0) {
    return (scaled * 10n ** BigInt(-decimals)).toString();
  }
  const sign = number.mantissa < 0n ? '-' : '';
  const digits = (scaled < 0n ? -scaled : scaled).toString().padStart(decimals + 1, '0');
  return `${sign}${digits.slice(0, -decimals)}.${digits.slice(-decimals)}`;
}

/** Exponent of the number once it is rounded to so many digits. */
function roundedPower(number: Decimal, digits: number): number {
  const size = number.mantissa < 0n ? -number.mantissa : number.mantissa;
  const power = size.toString().length - 1 + number.exponent;
  const whole = rounded({ mantissa: size, exponent: number.exponent }, digits - 1 - power);
  return whole.toString().length > digits ? power + 1 : power;
}

function powerOfTen(size: number, digits: number): number {
  return size === 0 ? 0 : roundedPower(decimal(String(size)), digits);
}
