"""A unit vector n[3] as a rigid rotor: H = L^2/2I + V(n) in the basis of angular momentum.

Real spherical harmonics up to some l diagonalise L^2, l(l+1) (any textbook of quantum mechanics); V is integrated over
the sphere by Gauss-Legendre points in n_3 times equal steps in longitude, which is exact for polynomials in n of
moderate degree. The error of a level is its change to a smaller basis on another grid.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.polynomial.legendre import leggauss
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError

Floats = NDArray[np.float64]
Integers = NDArray[np.int_]
SPARE = 10  # points in n_3 beyond those that products of two harmonics need


@dataclass(frozen=True)
class Rotor:
    """L_E = I/2 n'.n' + V(n) with n.n = 1 and three components."""

    inertia: float
    potential: Callable[[Floats], Floats]  # of n, (3, …), to (…)

    def __post_init__(self) -> None:
        if not (self.inertia > 0 and math.isfinite(self.inertia)):
            raise SpectrumError(f"the moment of inertia must be positive and finite, got {self.inertia}")

    def values(self, n: Floats) -> Floats:
        """V at n. Raises SpectrumError where it is not finite."""
        with np.errstate(all="ignore"):
            v = np.broadcast_to(np.asarray(self.potential(n), dtype=np.float64), n.shape[1:])
        if not np.isfinite(v).all():
            where = ", ".join(f"{x:.4g}" for x in n[:, ~np.isfinite(v)][:, 0])
            raise SpectrumError(f"the potential is not finite at n = ({where})")
        return v


@dataclass(frozen=True)
class SphereBasis:
    """Real spherical harmonics up to `highest`, on a grid of `latitudes` times 2 `latitudes` points."""

    highest: int
    latitudes: int

    @staticmethod
    def up_to(highest: int) -> SphereBasis:
        return SphereBasis(highest, math.ceil(1.5 * highest) + SPARE)

    periods = (None, None, None)  # of the components

    @property
    def size(self) -> int:
        return (self.highest + 1) ** 2

    @cached_property
    def orders(self) -> Integers:
        """(2, N): l, and m from -l to l; negative m is the sine."""
        return np.array(
            [(degree, m) for degree in range(self.highest + 1) for m in range(-degree, degree + 1)], dtype=np.int_
        ).T

    def refined(self, factor: int) -> SphereBasis:
        """The same harmonics on a finer grid."""
        return replace(self, latitudes=factor * self.latitudes)

    # --- grids ----------------------------------------------------------------------------------------------
    @cached_property
    def _grid(self) -> tuple[Floats, Floats]:
        return _sphere(self.latitudes)

    @cached_property
    def _other(self) -> tuple[Floats, Floats]:
        return _sphere(self.latitudes + 3)

    @property
    def grid(self) -> Floats:
        """(3, P) unit vectors."""
        return self._grid[0]

    @property
    def step(self) -> Floats:
        """(P,) areas that belong to the points."""
        return self._grid[1]

    @property
    def midpoints(self) -> Floats:
        """(3, P') the points of another grid, for a test."""
        return self._other[0]

    @cached_property
    def harmonics(self) -> Floats:
        """(P, N) times the root of the area: orthonormal columns."""
        return self.at(self.grid) * np.sqrt(self.step)[:, None]

    def on_grid(self, vectors: Floats) -> Floats:
        """Wave functions times the root of the area, (P, k)."""
        return np.asarray(self.harmonics @ vectors)

    def between(self, vectors: Floats) -> Floats:
        """The same at `midpoints`, (P', k)."""
        return np.asarray((self.at(self.midpoints) * np.sqrt(self._other[1])[:, None]) @ vectors)

    def from_grid(self, waves: Floats) -> Floats:
        """Overlaps (N, k) with waves on the grid, (P, k)."""
        return np.asarray(self.harmonics.T @ waves)

    def at(self, n: Floats) -> Floats:
        """Values (K, N) of the harmonics at unit vectors n, (3, K)."""
        longitude = np.arctan2(n[1], n[0])
        legendre = _legendre(n[2], self.highest)
        values = np.empty((n.shape[1], self.size))
        for k, (degree, m) in enumerate(self.orders.T):
            wave = 1.0 if m == 0 else np.sqrt(2) * (np.cos(m * longitude) if m > 0 else np.sin(-m * longitude))
            values[:, k] = legendre[abs(m)][degree - abs(m)] * wave
        return values

    def matrix(self, rotor: Rotor) -> Floats:
        """H in this basis, (N, N)."""
        harmonics = self.harmonics
        matrix = harmonics.T @ (rotor.values(self.grid)[:, None] * harmonics)
        matrix[np.diag_indices(self.size)] += self.orders[0] * (self.orders[0] + 1) / (2 * rotor.inertia)
        return np.asarray((matrix + matrix.T) / 2)


def _sphere(latitudes: int) -> tuple[Floats, Floats]:
    """Unit vectors (3, P), and the areas that belong to them, (P,)."""
    z, weights = leggauss(latitudes)
    longitude = (np.arange(2 * latitudes) + 0.5) * (np.pi / latitudes)
    ring = np.sqrt(1 - z**2)
    points = np.stack(
        [np.outer(ring, np.cos(longitude)), np.outer(ring, np.sin(longitude)), np.outer(z, np.ones(2 * latitudes))]
    )
    return points.reshape(3, -1), np.repeat(weights * np.pi / latitudes, 2 * latitudes)


def _legendre(z: Floats, highest: int) -> list[list[Floats]]:
    """Normalised associated Legendre functions, [m][l - m], by the stable recursion upwards in l."""
    ring = np.sqrt(np.maximum(1 - z**2, 0.0))
    columns, diagonal = [], np.full_like(z, 1 / np.sqrt(4 * np.pi))
    for m in range(highest + 1):
        if m:
            diagonal = diagonal * ring * np.sqrt((2 * m + 1) / (2 * m))
        column = [diagonal]
        for k in range(m + 1, highest + 1):
            before = column[-2] * np.sqrt(((k - 1) ** 2 - m**2) / (4 * (k - 1) ** 2 - 1)) if k > m + 1 else 0.0
            column.append(np.sqrt((4 * k**2 - 1) / (k**2 - m**2)) * (z * column[-1] - before))
        columns.append(column)
    return columns
