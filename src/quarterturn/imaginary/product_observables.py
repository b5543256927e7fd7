"""Functions of two and three paths between the products of a basis.

A smooth function is multiplied with on the product grid. Whether it is smooth enough for the states that matter is
tested by the sum over the grid against the one over the points midway on every axis, as for one path; where it is not,
the products are evaluated on finer grids, and a function that is too rough for those (a kink, a step) is refused, with
what it would have been worth.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Circle, Interval, Numbers
from quarterturn.imaginary.observables import Diagonal, Observer
from quarterturn.imaginary.problem import Local
from quarterturn.imaginary.product import ProductBasis
from quarterturn.imaginary.rotor import SphereBasis

Floats = NDArray[np.float64]
Several = ProductBasis | SphereBasis  # bases of more than one variable
FACTORS = {2: (1, 2, 4, 8), 3: (1, 2, 3)}  # by which the grid is made finer for functions with kinks or poles
SMOOTH = 1e-9  # of the mean of |f|, between the two sums
ROUGH = 1e-7  # the same on the finest grid; what is rougher is refused
COLUMNS = 2_000_000  # numbers on the grid at once


@dataclass(frozen=True, eq=False)
class Multiplication(Diagonal):
    """Multiplication with a function on the product grid, (P,), of coefficients in a product basis."""

    basis: Several

    def __matmul__(self, vectors: Numbers) -> Numbers:
        width = max(1, COLUMNS // len(self.values))
        parts = [vectors[:, k : k + width] for k in range(0, vectors.shape[1], width)]
        return np.concatenate(
            [self.basis.from_grid(self.values[:, None] * self.basis.on_grid(part)) for part in parts], axis=1
        )


@dataclass(frozen=True, eq=False)
class ProductObserver:
    """Turns functions into operators, looked at with the states that matter: columns of `states`, with weights."""

    basis: Several
    states: Numbers  # (N, s)
    weights: Floats  # (s,)

    @cached_property
    def _refined(self) -> dict[int, tuple[Several, Numbers, Numbers]]:
        """Finer grids, and there the density times a constant and slow waves, on the grid and midway, (2, P) each."""
        return {}

    def _on(self, factor: int) -> tuple[Several, Numbers, Numbers]:
        if factor not in self._refined:
            basis: Several = self.basis if factor == 1 else self.basis.refined(factor)
            on_grid, between = self._density(basis.on_grid), self._density(basis.between)
            mean = basis.grid @ on_grid
            width = np.sqrt(((basis.grid - mean[:, None]) ** 2) @ on_grid)
            slow = np.array([2 * np.pi / p if p else 1.7 / w for p, w in zip(basis.periods, width, strict=True)])

            def both(density: Floats, q: Floats) -> Numbers:
                return np.stack([density + 0j, density * np.exp(1j * (slow @ (q - mean[:, None])))])

            self._refined[factor] = basis, both(on_grid, basis.grid), both(between, basis.midpoints)
        return self._refined[factor]

    def _density(self, waves: Callable[[Numbers], Numbers]) -> Floats:
        total = np.zeros(())
        for k in range(0, self.states.shape[1], 16):
            total = total + np.abs(waves(self.states[:, k : k + 16])) ** 2 @ self.weights[k : k + 16]
        return np.asarray(total / self.weights.sum())

    def operator(self, f: Local) -> Diagonal:
        """f(q) as an operator. Raises SpectrumError where f is not finite or not smooth enough for the finest grid."""
        for factor in FACTORS[len(self.basis.periods)]:
            basis, on_grid, between = self._on(factor)
            values = self._values(f, basis.grid)
            size = float(np.abs(values) @ np.real(on_grid[0]))
            change = float(np.max(np.abs(on_grid @ values - between @ self._values(f, basis.midpoints))))
            if change <= (ROUGH if factor == FACTORS[len(self.basis.periods)][-1] else SMOOTH) * size:
                return Multiplication(values, basis)
        raise SpectrumError(
            f"an observable with a kink, a step or a pole is not resolved with several paths: its average would be "
            f"known to {change:.1g} only"
        )

    def _values(self, f: Local, q: Floats) -> Floats:
        with np.errstate(all="ignore"):
            value = np.broadcast_to(np.asarray(f(q)), q.shape[1:])
        if not np.isfinite(value).all():
            where = ", ".join(f"{x:.4g}" for x in q[:, ~np.isfinite(value)][:, 0])
            raise SpectrumError(f"an observable is not finite at q = ({where})")
        return np.asarray(value)


def observer(basis: Interval | Circle | Several, states: Numbers, weights: Floats) -> Observer | ProductObserver:
    """What turns functions into operators in a basis."""
    if isinstance(basis, Several):
        return ProductObserver(basis, states, weights)
    return Observer(basis, states, weights)
