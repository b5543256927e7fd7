"""How much algebra one cell may ask for: counted in operations, not in seconds, so that every machine answers alike.

A unit is about ten microseconds. Outside `limited` nothing is counted.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from contextvars import ContextVar
from fractions import Fraction

from quarterturn.errors import ActionError

MOST_UNITS = 100_000
MOST_BITS = 20_000  # of the numerator and the denominator of a number
_left: ContextVar[list[int] | None] = ContextVar("units of algebra that are left", default=None)


@contextmanager
def limited() -> Iterator[None]:
    """Inside, `spend` counts down from the limit."""
    token = _left.set([MOST_UNITS])
    try:
        yield
    finally:
        _left.reset(token)


def spend(units: int) -> None:
    """Count some algebra. Raises ActionError where the limit is passed."""
    left = _left.get()
    if left is None:
        return
    left[0] -= units
    if left[0] < 0:
        words = "this takes more algebra than one cell may ask for: use fewer terms, lower powers, fewer sums"
        raise ActionError(words)


def checked_number(value: Fraction) -> Fraction:
    """The number itself. Raises ActionError for one of absurdly many digits."""
    if max(value.numerator.bit_length(), value.denominator.bit_length()) > MOST_BITS:
        raise ActionError(f"a number of more than {MOST_BITS * 3 // 10} digits")
    return value
