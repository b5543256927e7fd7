"""Sums of a divergent series from its exact coefficients: partial sums, Pade, Borel-Pade, conformally mapped Borel.

Pade approximants next to the diagonal are the convergents of one continued fraction, found in decimal arithmetic with
digits to spare, since high orders cancel hundreds of them. Each sum carries the change that fewer coefficients make;
it is an error estimate and no bound. Sources: Baker and Graves-Morris, Pade Approximants (1996), chapter 4; Graffi,
Grecchi and Simon, Phys. Lett. B 32 (1970) 631 (Borel-Pade of the anharmonic oscillator); Le Guillou and Zinn-Justin,
Phys. Rev. Lett. 39 (1977) 95 (the conformal map of the cut Borel plane).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal, localcontext
from typing import Any

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
DIGITS_PER_ORDER, LEAST_DIGITS = 6, 60
NODES = 200  # of the double-exponential rule for a Laplace integral
ROUNDING = 4e-15  # relative, of a value; integrals over doubles take ten times as much
BESIDE, FAR_BESIDE = 0.05, 0.5  # angles [rad] of a path beside the positive axis: to test it, and to avoid a cut
SAFETY = 2  # of random series, one sum in fifty misses its level by more than the spread alone
WINDOW = 4  # orders that must agree


def digits_for(order: int) -> int:
    """Decimal digits that a calculation with so many coefficients carries."""
    return LEAST_DIGITS + DIGITS_PER_ORDER * order


@dataclass(frozen=True)
class Sum:
    """A value made from the coefficients up to `order`, with an error estimate.

    `ambiguity` is the imaginary part that the side of a cut decides on; zero where there is none.
    """

    value: float
    error: float
    order: int
    ambiguity: float = 0.0


# --- partial sums -----------------------------------------------------------------------------------------------
def partial_sums(series: Sequence[Decimal], z: Decimal) -> Floats:
    """(len,) sums to each order; infinities where a float holds no more."""
    with localcontext(prec=digits_for(len(series))):
        total, power, sums = Decimal(0), Decimal(1), []
        for a in series:
            total, power = total + a * power, power * z
            sums.append(float(total))
    return np.array(sums)


def truncated(series: Sequence[Decimal], z: Decimal) -> Sum:
    """The partial sum that stops before the smallest terms, the largest of which is the error.

    A single small term means nothing where signs and sizes fluctuate: a term and its three neighbours are looked at.
    """
    with localcontext(prec=digits_for(len(series))):
        sizes = [(n, abs(a * z**n)) for n, a in enumerate(series) if n and a]
    if not sizes or len(series) > 2 * sizes[-1][0] + 2:  # nothing but zeros follows: the series ends
        smallest, n = Decimal(0), len(series)
    else:
        around = [sizes[max(0, i - 1) : i + 3] for i in range(len(sizes))]
        smallest, n = min((max(size for _, size in near), sizes[i][0]) for i, near in enumerate(around))
    value = float(partial_sums(series[:n], z)[-1])
    return Sum(value, float(smallest) + ROUNDING * max(abs(value), float(abs(series[0]))), n - 1)


# --- Pade -------------------------------------------------------------------------------------------------------
@dataclass(frozen=True)
class ContinuedFraction:
    """a_0 + x^lead c_1 / (1 + c_2 x / (1 + c_3 x / …)), which agrees with a power series term by term."""

    head: Decimal
    lead: int
    links: tuple[Decimal, ...]

    def convergent(self, x: Any, links: Sequence[Any], head: Any) -> Any:
        """The value with these links, from the last to the first; x a Decimal or an array."""
        tail = 0 * x
        for c in reversed(links[1:]):
            tail = c * x / (1 + tail)
        return head + links[0] * x**self.lead / (1 + tail)

    def on(self, x: Complexes, terms: int) -> Complexes:
        """The convergent with so many links, in floats."""
        with np.errstate(all="ignore"):
            value: Complexes = self.convergent(x, [float(c) for c in self.links[:terms]], float(self.head))
        return value


def continued_fraction(series: Sequence[Decimal]) -> ContinuedFraction | None:
    """By Viskovatov's algorithm. None for a constant, and where a link vanishes so that the table has gaps."""
    lead = next((n for n, a in enumerate(series) if n and a), 0)
    if not lead:
        return None
    with localcontext(prec=digits_for(len(series))):
        above = list(series[lead:])
        below = [Decimal(1), *([Decimal(0)] * (len(above) - 1))]
        links = []
        while above:
            if not above[0]:
                return None
            c = above[0] / below[0]
            links.append(c)
            above, below = [c * b - a for a, b in zip(above[1:], below[1:], strict=True)], above[: len(above) - 1]
    return ContinuedFraction(series[0], lead, tuple(links))


def pade_values(fraction: ContinuedFraction, z: Decimal) -> list[float]:
    """Values of the approximants [0/0], [1/0], [1/1], [2/1], … that use ever more coefficients."""
    values = [float(fraction.head)] * fraction.lead
    with localcontext(prec=digits_for(len(fraction.links))):
        for terms in range(1, len(fraction.links) + 1):
            try:
                values.append(float(fraction.convergent(z, fraction.links[:terms], fraction.head)))
            except ArithmeticError:  # a pole at z
                values.append(math.inf)
    return values


def settled(values: Sequence[float], rounding: float) -> Sum | None:
    """The last value; its error is twice the spread with one, two, and a sixth fewer coefficients.

    For a Stieltjes series the value with one coefficient fewer lies on the other side of the limit.
    """
    last = len(values) - 1
    used = [values[last - fewer] for fewer in (0, 1, 2, max(3, len(values) // 6)) if fewer <= last]
    if len(used) < 4 or not all(map(math.isfinite, used)):
        return None
    return Sum(used[0], SAFETY * (max(used) - min(used)) + rounding * abs(used[0]), last)


def pade_sum(fraction: ContinuedFraction, z: Decimal) -> Sum | None:
    """The approximant of highest order. None where it has a pole at z."""
    return settled(pade_values(fraction, z), ROUNDING)


# --- Borel ------------------------------------------------------------------------------------------------------
def borel(series: Sequence[Decimal], growth: int) -> list[Decimal]:
    """Coefficients b_n = a_n / (growth n)!, so that sum a_n z^n = int_0^inf e^-t sum b_n (z t^growth)^n dt."""
    with localcontext(prec=digits_for(len(series))):
        return [a / math.factorial(growth * n) for n, a in enumerate(series)]


def laplace_rule(angle: float) -> tuple[Complexes, Complexes]:
    """Nodes and weights of int_0^inf e^-t f(t) dt on a ray; double-exponential, t = exp(x - exp(-x))."""
    x = np.linspace(-4.5, 4.2, NODES)
    t = np.exp(x - np.exp(-x)) * np.exp(1j * angle)
    return t, t * (1 + np.exp(-x)) * np.exp(-t) * (x[1] - x[0])


def borel_pade_values(fraction: ContinuedFraction, z: float, growth: int, angle: float) -> Complexes:
    """Laplace integrals along a ray over the convergents of a Borel transform's continued fraction, one per order."""
    t, weights = laplace_rule(angle)
    x = z * t**growth
    integrals = [np.sum(weights * fraction.on(x, terms)) for terms in range(1, len(fraction.links) + 1)]
    return np.array([complex(float(fraction.head))] * fraction.lead + integrals)


def borel_pade_sum(fraction: ContinuedFraction, z: float, growth: int, beside: bool) -> Sum | None:
    """The Laplace integral over the last convergent.

    `beside` says that the Borel transform is singular on the path: then it is followed to either side of the axis, the
    mean is the value, and half the difference the ambiguity. Else the error includes what a path a little beside the
    axis changes: poles that do not belong there.
    """
    angle = (FAR_BESIDE if beside else BESIDE) / growth
    off_axis = borel_pade_values(fraction, z, growth, angle)
    if beside:
        found = settled(off_axis.real.tolist(), 10 * ROUNDING)
        return found and Sum(found.value, found.error, found.order, float(abs(off_axis[-1].imag)))
    on_axis = borel_pade_values(fraction, z, growth, 0.0).real
    found = settled(on_axis.tolist(), 10 * ROUNDING)
    return found and Sum(found.value, found.error + float(abs(on_axis[-1] - off_axis[-1].real)), found.order)


# --- conformal map ----------------------------------------------------------------------------------------------
def mapped_values(series: Sequence[Decimal], z: float, growth: int, singularity: float) -> Floats:
    """Sums to each order of the Borel transform re-expanded in w, s = 4 A w / (1 - w)^2, A = `singularity` > 0.

    w maps the plane of s, cut from -A to -infinity, to the disc, so that the positive axis lies inside; z > 0.
    """
    expanded = _in_disc(borel(series, growth), Decimal(repr(singularity)))
    t, weights = laplace_rule(0.0)
    root = np.sqrt(1 + z * t.real**growth / singularity)
    w = (root - 1) / (root + 1)
    powers = w[None, :] ** np.arange(len(expanded))[:, None]
    terms = np.array([float(c) for c in expanded]) * (powers @ weights.real)
    return np.asarray(np.cumsum(terms))


def mapped_sum(values: Floats) -> Sum | None:
    """The sum at the order where neighbours agree best: the expansion in w need not converge for large z.

    Its error is the spread over a quarter fewer and more orders: where a turning point is mistaken for a plateau, they
    differ.
    """
    if len(values) < 3 * WINDOW:
        return None
    spread = [float(np.ptp(values[n - WINDOW : n + 1])) for n in range(WINDOW, len(values))]
    best = int(np.argmin(spread)) + WINDOW
    reach = max(WINDOW, best // 4)
    value = float(values[best])
    return Sum(value, float(np.ptp(values[best - reach : best + reach + 1])) + 10 * ROUNDING * abs(value), best)


def _in_disc(transform: Sequence[Decimal], singularity: Decimal) -> list[Decimal]:
    """Coefficients in w: s^n = (4 A)^n w^n sum_m binom(2 n + m - 1, m) w^m."""
    size = len(transform)
    with localcontext(prec=digits_for(size)):
        total = [Decimal(0)] * size
        for n, b in enumerate(transform):
            scaled = b * (4 * singularity) ** n
            for m in range(size - n):
                total[n + m] += scaled * (math.comb(2 * n + m - 1, m) if n else int(m == 0))
        return total
