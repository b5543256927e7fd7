"""Localised functions of a finite box and of a circle: the basis of every solution in this room.

In a box they are combinations of sin(n pi (x - low) / L), on the circle of plane waves, each centred at one point of an
equidistant grid and zero at the others, so that a smooth function of q is diagonal and any function of the kinetic
energy is known in closed form (Colbert and Miller, J. Chem. Phys. 96 (1992) 1982; Littlejohn et al., J. Chem. Phys.
116 (2002) 8691). For analytic potentials errors fall exponentially with the number of points.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.fft import dct

Floats = NDArray[np.float64]
Numbers = NDArray[Any]  # float64; complex128 on a circle with flux


@dataclass(frozen=True, eq=False)
class Interval:
    """`points` localised combinations of the sine functions of [low, high]: wave functions vanish at both ends."""

    low: float
    high: float
    points: int

    @property
    def step(self) -> float:
        return (self.high - self.low) / (self.points + 1)

    @cached_property
    def grid(self) -> Floats:
        """(points,), mirror-symmetric to the last bit where the box is."""
        offsets = np.arange(self.points) - (self.points - 1) / 2
        return np.asarray((self.low + self.high) / 2 + self.step * offsets)

    @cached_property
    def momenta(self) -> Floats:
        """(points,) wave numbers, ascending."""
        return np.asarray(np.arange(1, self.points + 1) * (np.pi / (self.high - self.low)))

    def operator(self, function: Floats) -> Floats:
        """Matrix (points, points) of a function of the momentum, given at `momenta`; it must be even in p."""
        size = self.points + 1
        padded = np.zeros(size + 1)
        padded[1:-1] = function
        c = dct(padded, type=1) / (2 * size)
        both = np.concatenate([c[::-1], c[1:], c[-2:0:-1]])  # at separations -size … 2 size - 1
        i = np.arange(1, size)
        return np.asarray(both[size + i[:, None] - i[None, :]] - both[size + i[:, None] + i[None, :]])

    @cached_property
    def waves(self) -> Floats:
        """(points, points), orthogonal: from the basis functions to the waves of `momenta`."""
        size = self.points + 1
        n = np.arange(1, size)
        return np.asarray(np.sin(np.pi / size * (np.multiply.outer(n, n) % (2 * size))) * np.sqrt(2 / size))

    def at(self, x: Floats) -> Floats:
        """Values (K, points) of the basis functions at the points x, (K,)."""
        size = self.points + 1
        n = np.arange(1, size)
        waves = np.sin(np.multiply.outer(x - self.low, self.momenta)) * np.sqrt(2 / (self.high - self.low))
        table = np.sin(np.pi / size * np.arange(2 * size)) * np.sqrt(2 / size)
        return np.asarray(waves @ table[np.multiply.outer(n, n) % (2 * size)])

    def on_grid(self, vectors: Numbers) -> Numbers:
        """Wave functions times the root of the step at the points of the grid: the coefficients themselves."""
        return vectors

    @cached_property
    def fastest(self) -> Floats:
        """(k, points), the fastest waves: what a resolved wave function has nothing of."""
        size, count = self.points + 1, 2 + self.points // 40
        n = np.arange(size - count, size)
        return np.asarray(np.sin(np.pi / size * np.multiply.outer(n, np.arange(1, size))) * np.sqrt(2 / size))

    @cached_property
    def edges(self) -> Floats:
        """(points + 1,) borders of the cells round the grid points: the box's ends and the points midway."""
        return np.concatenate([[self.low], (self.grid[1:] + self.grid[:-1]) / 2, [self.high]])


@dataclass(frozen=True, eq=False)
class Circle:
    """`points` (odd) localised combinations of the plane waves of a circle, centred on the flux A."""

    period: float
    points: int
    flux: float = 0.0

    @property
    def step(self) -> float:
        return self.period / self.points

    @cached_property
    def grid(self) -> Floats:
        """(points,), from -period/2 to period/2 with 0 in the middle."""
        return np.asarray((np.arange(self.points) - self.points // 2) * self.step)

    @cached_property
    def _orders(self) -> NDArray[np.int64]:
        """Integers k of the plane waves exp(2 pi i k q / period), those nearest to the flux."""
        nearest = round(self.flux * self.period / (2 * np.pi))
        return np.asarray(np.arange(self.points) - self.points // 2 + nearest, dtype=np.int64)

    def _phases(self, positions: NDArray[np.int64]) -> NDArray[np.complex128]:
        """exp(2 pi i j k / points) for integer positions j, (J, points); exact angles by reducing j k."""
        roots = np.exp(2j * np.pi / self.points * np.arange(self.points))
        return np.asarray(roots[np.multiply.outer(positions, self._orders) % self.points])

    @cached_property
    def momenta(self) -> Floats:
        """(points,) values of p - A."""
        return np.asarray(2 * np.pi * self._orders / self.period - self.flux)

    @cached_property
    def waves(self) -> NDArray[np.complex128]:
        """(points, points), unitary: from the basis functions to the waves of `momenta`."""
        return np.asarray(self._phases(np.arange(self.points) - self.points // 2).conj().T / np.sqrt(self.points))

    def operator(self, function: Floats) -> Numbers:
        """Matrix (points, points), Hermitian, of a function of p - A given at `momenta`."""
        i = np.arange(self.points)
        c: Numbers = self._phases(i) @ function / self.points
        if self.flux == 0 and np.array_equal(function, function[::-1]):
            c = c.real
        matrix = c[(i[:, None] - i[None, :]) % self.points]
        return np.asarray((matrix + matrix.conj().T) / 2)

    def at(self, x: Floats) -> Numbers:
        """Values (K, points) of the basis functions at the points x, (K,)."""
        waves = np.exp(2j * np.pi / self.period * np.multiply.outer(x, self._orders))
        values = waves @ self._phases(np.arange(self.points) - self.points // 2).conj().T
        values /= np.sqrt(self.period * self.points)
        return np.asarray(values.real if self.flux == 0 else values)

    def on_grid(self, vectors: Numbers) -> Numbers:
        """Wave functions times the root of the step at the points of the grid: the coefficients themselves."""
        return vectors

    @cached_property
    def fastest(self) -> Numbers:
        """(k, points), the fastest waves of both directions."""
        count = 1 + self.points // 40
        waves = self._phases(np.arange(self.points) - self.points // 2).conj().T / np.sqrt(self.points)
        return np.asarray(np.concatenate([waves[:count], waves[-count:]]))

    @cached_property
    def edges(self) -> Floats:
        """(points + 1,) borders of the cells round the grid points."""
        return np.asarray((np.arange(self.points + 1) - self.points / 2) * self.step)


Basis = Interval | Circle


def diagonalise(matrix: Numbers, mirrored: bool) -> tuple[Floats, Numbers]:
    """Eigenvalues ascending and orthonormal eigenvectors; by parity where the matrix is `mirrored`.

    A matrix that the reversal of the grid leaves unchanged falls apart into an even and an odd block, so that a
    tunnelling splitting is the difference of two independent eigenvalues and each state has its parity exactly.
    """
    if not mirrored:
        values, vectors = np.linalg.eigh(matrix)
        return values, _signed(vectors)
    size = len(matrix)
    half, middle = size // 2, size % 2
    even, odd = parity_blocks(matrix)
    even_values, even_vectors = np.linalg.eigh(even)
    odd_values, odd_vectors = np.linalg.eigh(odd)
    vectors = np.zeros((size, size))
    top = np.concatenate([even_vectors[:half], odd_vectors], axis=1) / np.sqrt(2)
    vectors[:half] = top
    vectors[size - half :, : half + middle] = top[::-1, : half + middle]
    vectors[size - half :, half + middle :] = -top[::-1, half + middle :]
    if middle:
        vectors[half, : half + middle] = even_vectors[half]
    values = np.concatenate([even_values, odd_values])
    order = np.argsort(values, kind="stable")
    return values[order], _signed(vectors[:, order])


def eigenvalues(matrix: Numbers, mirrored: bool) -> Floats:
    """Eigenvalues alone, ascending."""
    if not mirrored:
        return np.asarray(np.linalg.eigvalsh(matrix))
    return np.sort(np.concatenate([np.linalg.eigvalsh(block) for block in parity_blocks(matrix)]))


def parity_blocks(matrix: Numbers) -> tuple[Numbers, Numbers]:
    """Even and odd block of a matrix that the reversal of both its indices leaves unchanged."""
    size = len(matrix)
    half, middle = size // 2, size % 2
    near, far = matrix[:half, :half], matrix[:half, size - half :][:, ::-1]
    even = np.empty((half + middle, half + middle))
    even[:half, :half] = near + far
    if middle:
        even[half, :half] = even[:half, half] = np.sqrt(2) * matrix[:half, half]
        even[half, half] = matrix[half, half]
    return even, near - far


def _signed(vectors: Numbers) -> Numbers:
    """Phases fixed: positive on the last lobe towards large q; for complex vectors, real and positive where largest."""
    size = np.abs(vectors)
    columns = np.arange(vectors.shape[1])
    if np.iscomplexobj(vectors):
        largest = vectors[np.argmax(size, axis=0), columns]
        return np.asarray(vectors * (np.abs(largest) / largest)[None, :])
    last = len(vectors) - 1 - np.argmax((size > 0.05 * size.max(axis=0))[::-1], axis=0)
    return np.asarray(vectors * np.where(vectors[last, columns] < 0, -1.0, 1.0)[None, :])
