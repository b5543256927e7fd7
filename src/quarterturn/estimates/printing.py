"""Numbers as they stand in a paper: 0.3058(12), two digits of error.

The digits in brackets belong to the last digits of the value; with a decimal point, as in 12.3(4.5), they are the
error itself. Very large and very small numbers share one exponent, 1.234(56)e-07.
"""

import math
from decimal import Decimal, localcontext

ERROR_DIGITS = 2
PLAIN_DIGITS = 6  # of a value without an error
WIDEST_NUMBER = 700  # digits that a float with its error can need
UNRESOLVED_DIGITS = 4  # of a value whose error is not known
SMALLEST_PLAIN, LARGEST_PLAIN = -4, 6  # powers of ten between which no exponent is written


def format_value_error(value: float | None, error: float | None) -> str:
    """`value` and its one-sigma `error` in the form 0.3058(12).

    An error of None leaves the value alone; an error of zero shows as (0); errors that are not finite are named.
    """
    if value is None or math.isnan(value):
        return "nan"
    if math.isinf(value):
        return str(value)
    if error is None:
        return format(value, f".{PLAIN_DIGITS}g")
    if error == 0:
        return f"{value:.{PLAIN_DIGITS}g}(0)"
    if not math.isfinite(error):
        return f"{value:.{UNRESOLVED_DIGITS}g}({error})"
    error = abs(error)
    power = _power_of_ten(max(abs(value), error))
    if SMALLEST_PLAIN <= power < LARGEST_PLAIN:
        return _plain(value, error, shift=0)
    return f"{_plain(value, error, shift=power)}e{power:+03d}"


def format_unresolved(value: float, reason: str) -> str:
    """A value with a word in the place of its error: 0.3058(unresolved)."""
    return f"{value:.{UNRESOLVED_DIGITS}g}({reason})"


def _power_of_ten(size: float) -> int:
    """Exponent of `size` once it is rounded to the digits of an error."""
    return int(f"{Decimal(repr(float(size))):.{ERROR_DIGITS - 1}e}".split("e")[1])


def _plain(value: float, error: float, shift: int) -> str:
    """`value(error)`, both over ten to the power `shift`, written without an exponent of their own.

    In decimal arithmetic, so that the digits are those of the float as it prints, at either end of the range.
    """
    decimals = ERROR_DIGITS - 1 - _power_of_ten(error) + shift
    with localcontext(prec=WIDEST_NUMBER):
        last_digit = Decimal(1).scaleb(-decimals)
        shown = Decimal(repr(float(value))).scaleb(-shift).quantize(last_digit)
        bracket = Decimal(repr(float(error))).scaleb(-shift).quantize(last_digit)
        if decimals >= ERROR_DIGITS:
            bracket = bracket.scaleb(decimals).quantize(Decimal(1))
    return f"{abs(shown) if shown == 0 else shown:f}({bracket:f})"
