"""All sums of one exact series at one value of its coupling, and how each approaches its value order by order.

Whether a series determines its function is read off the signs: terms of one sign put a singularity of the Borel
transform on the path of integration, and the series then knows nothing of effects such as exp(-S/g) (tunnelling).
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from decimal import Decimal, localcontext
from itertools import pairwise

from quarterturn.imaginary.growth import Growth, large_orders
from quarterturn.imaginary.perturbation import PerturbedOscillator
from quarterturn.imaginary.resummation import (
    Sum,
    borel,
    borel_pade_sum,
    borel_pade_values,
    continued_fraction,
    digits_for,
    mapped_sum,
    mapped_values,
    pade_sum,
    pade_values,
    partial_sums,
    truncated,
)
from quarterturn.imaginary.surds import Exact, decimal

PARTIAL, PADE, BOREL, MAPPED = "partial sum", "Padé", "Borel-Padé", "conformal Borel"
METHODS = (PARTIAL, PADE, BOREL, MAPPED)
FEWEST = 6  # coefficients, to resum anything


@dataclass(frozen=True)
class Summation:
    """Sums of sum_n a_n z^n, where z = g^stride."""

    stride: int
    signs: str  # alternating | equal | mixed: of the later terms
    growth: Growth | None
    sums: Mapping[str, Sum]  # by method
    missing: Mapping[str, str]  # methods that gave nothing, and why
    by_order: Mapping[str, Sequence[float]]  # value made from a_0 … a_n, n = 0, 1, …

    @property
    def determined(self) -> bool:
        """Whether nothing says that the function holds more than its series."""
        return self.signs != "equal"


def summation(problem: PerturbedOscillator, coefficients: Sequence[Exact], g: Decimal) -> Summation:
    """Every sum of a series at g.

    Parameters
    ----------
    problem
        What the coefficients belong to; gives the rate of their growth.
    coefficients
        E_0 … E_N, exact.
    g
        Value of the variable of the series.
    """
    stride = math.gcd(*(n for n, e in enumerate(coefficients) if n and e)) or 1
    digits = digits_for(len(coefficients))
    series = [decimal(e, digits) for e in coefficients[::stride]]
    with localcontext(prec=digits):
        z = g**stride
    rate = math.ceil(problem.growth * stride)
    growth = large_orders(series, rate)
    signs = _signs(series, z)
    sums, missing = {PARTIAL: truncated(series, z)}, dict.fromkeys(METHODS[1:], "too few coefficients")
    by_order: dict[str, Sequence[float]] = {PARTIAL: partial_sums(series, z).tolist()}
    if sums[PARTIAL].order == len(series) - 1 and not any(series[len(series) // 2 :]):
        missing = dict.fromkeys(missing, "the series ends: its sum is exact")
    elif len(series) >= FEWEST:
        _resum(series, z, rate, signs, growth, sums, missing, by_order)
    return Summation(stride, signs, growth, sums, missing, by_order)


def _resum(
    series: Sequence[Decimal],
    z: Decimal,
    rate: int,
    signs: str,
    growth: Growth | None,
    sums: dict[str, Sum],
    missing: dict[str, str],
    by_order: dict[str, Sequence[float]],
) -> None:
    def keep(method: str, found: Sum | None, values: Sequence[float]) -> None:
        by_order[method] = values
        if found is None:
            missing[method] = "the highest approximants have a pole here"
        else:
            sums[method] = found
            del missing[method]

    fraction = continued_fraction(series)
    if fraction is None:
        missing[PADE] = "an approximant of lower order does not exist"
    else:
        keep(PADE, pade_sum(fraction, z), pade_values(fraction, z))
    if rate < 1:
        missing[BOREL] = missing[MAPPED] = "the series has a radius of convergence"
        return
    transform = continued_fraction(borel(series, rate))
    beside = signs == "equal"
    if transform is None:
        missing[BOREL] = "an approximant of lower order does not exist"
    else:
        values = borel_pade_values(transform, float(z), rate, 0.0).real.tolist()
        keep(BOREL, borel_pade_sum(transform, float(z), rate, beside), [] if beside else values)
    if growth is None or growth.singularity > 0 or z < 0:
        missing[MAPPED] = "needs a Borel transform whose only cut is on the negative axis"
    else:
        mapped = mapped_values(series, float(z), rate, -growth.singularity)
        keep(MAPPED, mapped_sum(mapped), mapped.tolist())


def _signs(series: Sequence[Decimal], z: Decimal) -> str:
    later = [a if z >= 0 or n % 2 == 0 else -a for n, a in enumerate(series) if n >= len(series) // 2 and a]
    changes = {(a > 0) != (b > 0) for a, b in pairwise(later)}
    return "mixed" if len(changes) != 1 else "alternating" if changes == {True} else "equal"
