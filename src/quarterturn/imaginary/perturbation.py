"""Exact Rayleigh-Schroedinger coefficients of one path: an oscillator perturbed by any polynomial in one coupling.

The wave function is exp(-m w x^2/2) sum_n g^n sum_j B_nj x^j, and the Schroedinger equation becomes a recursion
between rational numbers, which is walked from the highest power of x down (Bender and Wu, Phys. Rev. 184 (1969) 1231,
for any level and polynomial). Each row is kept over one common denominator, so that the inner sums are over integers.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.surds import Exact, Surd, denominator, numerator, square_root

MOST_ORDERS = 400
MOST_TERMS = 4000  # of one row: a wave function of higher degree takes minutes
HIGHEST_LEVEL = 100

Integers = NDArray[Any]  # of Python's own integers, or of surds of them


@dataclass(frozen=True)
class PerturbedOscillator:
    """H = p^2/2m + sum_p g^p V_p(q), where V_0 is quadratic with a minimum; all numbers exact."""

    mass: Fraction
    terms: Mapping[tuple[int, int], Fraction]  # (power of g, power of q): coefficient

    def __post_init__(self) -> None:
        if self.mass <= 0:
            raise SpectrumError(f"the mass must be positive, got {self.mass}")
        higher = [k for (p, k), c in self.terms.items() if p == 0 and k > 2 and c]
        if higher:
            raise SpectrumError(
                f"at zero coupling the potential still holds q^{max(higher)}: a series in the coupling starts from an "
                "oscillator, so this term must be multiplied by it"
            )
        if self._of(0, 2) <= 0:
            raise SpectrumError(
                "at zero coupling there is no oscillator to start from: the potential needs a positive term q^2 "
                "without the coupling; rescale the path so that the quadratic part does not depend on it"
            )

    def _of(self, p: int, k: int) -> Fraction:
        return self.terms.get((p, k), Fraction(0))

    @cached_property
    def centre(self) -> Fraction:
        """Where V_0 is lowest."""
        return -self._of(0, 1) / (2 * self._of(0, 2))

    @cached_property
    def about_centre(self) -> dict[tuple[int, int], Fraction]:
        """The terms in powers of x = q - centre, zeros left out."""
        moved: dict[tuple[int, int], Fraction] = {}
        for (p, k), c in self.terms.items():
            for i in range(k + 1):
                moved[p, i] = moved.get((p, i), Fraction(0)) + c * math.comb(k, i) * self.centre ** (k - i)
        return {key: c for key, c in moved.items() if c}

    @cached_property
    def frequency(self) -> Exact:
        """w of the oscillator."""
        return square_root(2 * self._of(0, 2) / self.mass)

    @cached_property
    def perturbation(self) -> dict[tuple[int, int], Fraction]:
        """The terms in x with at least one power of the coupling."""
        return {(p, k): c for (p, k), c in self.about_centre.items() if p > 0}

    @cached_property
    def growth(self) -> Fraction:
        """s, where coefficients grow like (s n)!: the largest (k - 2) / 2p of a term g^p x^k; 0 or less is none."""
        return max((Fraction(k - 2, 2 * p) for p, k in self.perturbation), default=Fraction(0))


def energy_coefficients(problem: PerturbedOscillator, order: int, level: int = 0) -> tuple[Exact, ...]:
    """E_0 … E_order of a level's energy sum E_n g^n, exactly.

    Parameters
    ----------
    problem
        The oscillator and its perturbation.
    order
        The highest power of the coupling.
    level
        0 for the ground state.

    Returns
    -------
    tuple
        order + 1 rational numbers; numbers a + b sqrt(N) where the frequency is irrational.

    Raises
    ------
    SpectrumError
        More orders, levels or terms than are calculated in a minute or so.
    """
    if not 0 <= level <= HIGHEST_LEVEL:
        raise SpectrumError(f"a series is made for the levels 0 to {HIGHEST_LEVEL}, not for {level}")
    if not 0 <= order <= MOST_ORDERS:
        raise SpectrumError(f"a series is made to order {MOST_ORDERS} at most, {order} was asked for")
    degrees = _degrees(problem, order, level)
    if degrees[-1] > MOST_TERMS:
        raise SpectrumError(f"order {order} needs wave functions of degree {degrees[-1]}, more than {MOST_TERMS}")
    recursion = _Recursion(problem, level, degrees)
    for n in range(1, order + 1):
        recursion.advance(n)
    w = problem.frequency
    zeroth = w * Fraction(2 * level + 1, 2) + problem.about_centre.get((0, 0), Fraction(0))
    return tuple(_simplest(e) for e in (zeroth, *recursion.shifts[1:]))


def _simplest(value: Any) -> Exact:
    return value.rational if isinstance(value, Surd) and not value.irrational else value


def _degrees(problem: PerturbedOscillator, order: int, level: int) -> list[int]:
    degrees = [level]
    for n in range(1, order + 1):
        reached = [degrees[n - p] + k for p, k in problem.perturbation if p <= n]
        degrees.append(max([level, *reached]))
    return degrees


class _Recursion:
    """Rows B_n of the wave function, each as integers over a common denominator, and the energies E_n."""

    def __init__(self, problem: PerturbedOscillator, level: int, degrees: list[int]) -> None:
        self.problem, self.level, self.degrees = problem, level, degrees
        w = problem.frequency
        self.per_frequency: Exact = w.inverse() if isinstance(w, Surd) else 1 / w
        self.shifts: list[Any] = [Fraction(0)]  # E_n for n >= 1; the zeroth does not enter
        self.rows: list[Integers] = []
        self.denominators: list[int] = []
        self._keep(self._solved(0, [Fraction(0)] * (level + 1)))

    def advance(self, n: int) -> None:
        """Row n and E_n from the rows before."""
        source, over = self._source(n)
        row = [Fraction(1, over) * value for value in source]
        solved = self._solved(n, row)
        self._keep(solved)

    def _source(self, n: int) -> tuple[Integers, int]:
        """sum_pk V_pk B_(n-p, j-k) - sum_(0<p<n) E_p B_(n-p, j), as integers over a common denominator."""
        pairs = [(p, 0, -self.shifts[p]) for p in range(1, n) if self.shifts[p]]
        pairs += [(p, k, c) for (p, k), c in self.problem.perturbation.items() if p <= n]
        over = math.lcm(*(denominator(c) * self.denominators[n - p] for p, _, c in pairs)) if pairs else 1
        total = np.zeros(self.degrees[n] + 1, dtype=object)
        for p, k, c in pairs:
            row = self.rows[n - p]
            total[k : k + len(row)] += row * numerator(c, over // self.denominators[n - p])
        return total, over

    def _solved(self, n: int, source: list[Any]) -> list[Any]:
        """w (j - level) B_j = (j + 2)(j + 1)/2m B_(j+2) - source_j + E_n B_0j, from the top down."""
        row: list[Any] = [Fraction(0)] * len(source)
        for j in range(len(source) - 1, -1, -1):
            right = -source[j]
            if j + 2 < len(row) and row[j + 2]:
                right = right + row[j + 2] * (Fraction((j + 2) * (j + 1), 2) / self.problem.mass)
            if j == self.level:  # the normalisation: B_n,level is 1 for n = 0 and 0 after
                if n:
                    self.shifts.append(-right)
                else:
                    row[j] = Fraction(1)
                continue
            if n and j < self.level:
                right = right + self.shifts[n] * self._unperturbed(j)
            if right:
                row[j] = right * self.per_frequency * Fraction(1, j - self.level)
        return row

    def _unperturbed(self, j: int) -> Any:
        return self.rows[0][j] * Fraction(1, self.denominators[0])

    def _keep(self, row: list[Any]) -> None:
        over = math.lcm(*(denominator(value) for value in row))
        kept = np.empty(len(row), dtype=object)
        kept[:] = [numerator(value, over) for value in row]
        self.rows.append(kept)
        self.denominators.append(over)
