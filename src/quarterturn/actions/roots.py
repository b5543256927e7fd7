"""Roots of rational numbers that are rational themselves."""

from __future__ import annotations

import math
from fractions import Fraction


def rational_root(base: Fraction | None, exponent: Fraction) -> Fraction | None:
    """base ** exponent where that is rational (square roots of squares), else None."""
    if base is None or base < 0 or exponent.denominator != 2:
        return None
    top, bottom = _exact_root(base.numerator), _exact_root(base.denominator)
    if top is None or bottom is None or (top == 0 and exponent < 0):
        return None
    return Fraction(top, bottom) ** exponent.numerator


def _exact_root(value: int) -> int | None:
    root = math.isqrt(value)
    return root if root * root == value else None
