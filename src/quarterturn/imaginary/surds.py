"""Numbers a + b sqrt(N) with rational a and b: what the exact series of an oscillator of irrational frequency holds."""

from __future__ import annotations

import math
from dataclasses import dataclass
from decimal import Decimal, localcontext
from fractions import Fraction
from typing import Any


@dataclass(frozen=True, slots=True)
class Surd:
    """rational + irrational sqrt(square); `square` is a positive integer, the same for all numbers that meet."""

    rational: Fraction
    irrational: Fraction
    square: int

    def __add__(self, other: Any) -> Surd:
        if isinstance(other, Surd):
            return Surd(self.rational + other.rational, self.irrational + other.irrational, self.square)
        return Surd(self.rational + other, self.irrational, self.square)

    __radd__ = __add__

    def __neg__(self) -> Surd:
        return Surd(-self.rational, -self.irrational, self.square)

    def __sub__(self, other: Any) -> Surd:
        return self + (-other)

    def __rsub__(self, other: Any) -> Surd:
        return (-self) + other

    def __mul__(self, other: Any) -> Surd:
        if not isinstance(other, Surd):
            return Surd(self.rational * other, self.irrational * other, self.square)
        return Surd(
            self.rational * other.rational + self.square * self.irrational * other.irrational,
            self.rational * other.irrational + self.irrational * other.rational,
            self.square,
        )

    __rmul__ = __mul__

    def inverse(self) -> Surd:
        norm = Fraction(self.rational**2 - self.square * self.irrational**2)
        return Surd(self.rational / norm, -self.irrational / norm, self.square)

    def __bool__(self) -> bool:
        return bool(self.rational or self.irrational)

    def __eq__(self, other: object) -> bool:
        if isinstance(other, Surd):
            return (self.rational, self.irrational, self.square) == (other.rational, other.irrational, other.square)
        return self.irrational == 0 and self.rational == other

    def __hash__(self) -> int:
        return hash((self.rational, self.irrational, self.square)) if self.irrational else hash(self.rational)

    def __float__(self) -> float:
        return float(decimal(self, 60))

    def __str__(self) -> str:
        root = f"sqrt({self.square})"
        if not self.irrational:
            return str(self.rational)
        part = f"{self.irrational} {root}" if abs(self.irrational) != 1 else root if self.irrational > 0 else f"-{root}"
        return part if not self.rational else f"{self.rational} {'+' if self.irrational > 0 else '-'} {part.strip('-')}"


Exact = Fraction | Surd


def square_root(value: Fraction) -> Exact:
    """sqrt(value), rational where it can be. `value` is positive."""
    top, bottom = math.isqrt(value.numerator), math.isqrt(value.denominator)
    if top**2 == value.numerator and bottom**2 == value.denominator:
        return Fraction(top, bottom)
    square, outside = value.numerator * value.denominator, 1
    for prime in (2, 3, 5, 7, 11, 13):
        while square % prime**2 == 0:
            square, outside = square // prime**2, outside * prime
    return Surd(Fraction(0), Fraction(outside, value.denominator), square)


def denominator(value: Exact | int) -> int:
    """The smallest whole number that makes `value` one of whole numbers."""
    if isinstance(value, Surd):
        return math.lcm(Fraction(value.rational).denominator, Fraction(value.irrational).denominator)
    return value.denominator


def numerator(value: Exact | int, over: int) -> Any:
    """value * over, where that is made of whole numbers: an int, or a Surd of two."""
    if isinstance(value, Surd):
        return Surd(numerator(value.rational, over), numerator(value.irrational, over), value.square)
    return value.numerator * (over // value.denominator)


def decimal(value: Exact | int, digits: int) -> Decimal:
    """`value` to so many digits; twice as many are carried, for what two parts of a surd may cancel."""
    with localcontext(prec=2 * digits if isinstance(value, Surd) else digits):
        if isinstance(value, Surd):
            root = Decimal(value.square).sqrt()
            result = decimal(value.rational, 2 * digits) + decimal(value.irrational, 2 * digits) * root
        else:
            result = Decimal(value.numerator) / Decimal(value.denominator)
    with localcontext(prec=digits):
        return +result


def bits(value: Exact) -> int:
    """Of the longest whole number in `value`."""
    parts = (value.rational, value.irrational) if isinstance(value, Surd) else (value,)
    return max(n.bit_length() for part in parts for n in (part.numerator, part.denominator))


def hexadecimal(value: Exact) -> str:
    """`value` without loss, however long: whole numbers in base 16."""
    if isinstance(value, Surd):
        return f"{hexadecimal(value.rational)} {hexadecimal(value.irrational)} {value.square:x}"
    return f"{value.numerator:x}/{value.denominator:x}"
