"""Products of one-dimensional eigenfunctions, truncated by energy: the basis of two and three degrees of freedom.

Each coordinate has a grid of localised functions and, on it, the eigenfunctions of a reference potential: V averaged
over the densities of the other coordinates, found self-consistently (Bowman, J. Chem. Phys. 68 (1978) 608, for the
self-consistent potentials; Light, Hamilton and Lill, J. Chem. Phys. 82 (1985) 1400, for functions diagonal on a grid).
The Hamiltonian is that of the product grid, projected on the products whose energies add up to less than a cut.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Basis, Circle, Interval, Numbers, diagonalise
from quarterturn.imaginary.coupled import Coordinates
from quarterturn.imaginary.extent import Extent

Floats = NDArray[np.float64]
Integers = NDArray[np.int_]
CYCLES = 3
MIRROR = 1e-11  # relative difference between a function and its mirror image that is rounding
CEILING = 60.0  # of the largest kinetic energy, above which a potential is cut off


@dataclass(frozen=True, eq=False)
class Axis:
    """One coordinate: its grid, and the eigenfunctions of its reference potential there."""

    basis: Basis
    energies: Floats  # (n,)
    functions: Numbers  # (n, n), orthonormal columns
    reference: Floats  # (n,), the potential they belong to
    mirrored: bool

    @cached_property
    def parities(self) -> Integers:
        """(n,) +1 or -1 of each function under reflection; zeros where there is no such symmetry."""
        if not self.mirrored:
            return np.zeros(len(self.energies), dtype=np.int_)
        overlap = np.einsum("ij,ij->j", self.functions[::-1].conj(), self.functions)
        return np.asarray(np.sign(np.real(overlap)).astype(np.int_))

    def refined(self, factor: int) -> Axis:
        """The same functions at the points of a finer grid."""
        if isinstance(self.basis, Circle):
            finer: Basis = replace(self.basis, points=self.basis.points * factor | 1)
        else:
            finer = replace(self.basis, points=(self.basis.points + 1) * factor - 1)
        functions = self.basis.at(finer.grid) @ self.functions * np.sqrt(finer.step)
        return replace(self, basis=finer, functions=functions)

    @cached_property
    def moved(self) -> Numbers:
        """(n, n): p, on a circle p - A, on each function, at the points of the grid."""
        if isinstance(self.basis, Circle):
            return np.asarray(self.basis.operator(self.basis.momenta) @ self.functions)
        size = self.basis.points + 1
        n = np.arange(1, size)
        angles = np.multiply.outer(n, n) % (2 * size) * (np.pi / size)
        slopes = np.cos(angles) @ (self.basis.momenta[:, None] * np.sin(angles)) * (2 / size)
        return np.asarray(-1j * (slopes @ self.functions))


@dataclass(frozen=True, eq=False)
class Grid:
    """The product grid of some extents, with V on it."""

    coordinates: Coordinates
    bases: tuple[Basis, ...]
    v: Floats  # (n_1, …), cut off far above every kinetic energy

    @cached_property
    def points(self) -> Floats:
        """(C, n_1, …) in the coordinates of the solver."""
        return np.stack(np.meshgrid(*[b.grid for b in self.bases], indexing="ij"))

    @staticmethod
    def over(coordinates: Coordinates, extents: Sequence[Extent]) -> Grid:
        """Raises SpectrumError where V is minus infinity on the grid."""
        bases: list[Basis] = []
        for e, flux in zip(extents, coordinates.problem.fluxes, strict=True):
            if e.period is not None:
                bases.append(Circle(e.period, max(9, math.ceil(e.fastest * e.period / np.pi)) | 1, flux))
            else:
                bases.append(Interval(e.low, e.high, max(10, math.ceil((e.high - e.low) * e.fastest / np.pi))))
        v = coordinates.potential(np.stack(np.meshgrid(*[b.grid for b in bases], indexing="ij")))
        if np.isneginf(v).any():
            raise SpectrumError("the potential is minus infinity at a point of the grid: it is too singular")
        kinetic = max(float(np.max(b.momenta**2)) / (2 * m) for b, m in zip(bases, coordinates.masses, strict=True))
        return Grid(coordinates, tuple(bases), np.minimum(v, v.min() + CEILING * kinetic))

    def axes(self, spread: float) -> tuple[Axis, ...]:
        """Self-consistent reference potentials, averaged over states up to about `spread` above the lowest."""
        size = self.v.ndim
        references = [self.v.min(axis=tuple(j for j in range(size) if j != i)) for i in range(size)]
        for cycle in range(CYCLES):
            axes = tuple(self._axis(i, reference) for i, reference in enumerate(references))
            if cycle == CYCLES - 1:
                break
            densities = [_density(axis, spread) for axis in axes]
            references = [_averaged(self.v, densities, i) for i in range(size)]
        return axes

    def _axis(self, i: int, reference: Floats) -> Axis:
        basis = self.bases[i]
        mirrored = _same(reference, reference[::-1]) and abs(basis.grid[0] + basis.grid[-1]) == 0
        mirrored = mirrored and not (isinstance(basis, Circle) and basis.flux != 0)
        matrix = basis.operator(basis.momenta**2 / (2 * self.coordinates.masses[i]))
        if mirrored:
            reference = (reference + reference[::-1]) / 2
        matrix[np.diag_indices(len(matrix))] += reference
        return Axis(basis, *diagonalise(matrix, mirrored), reference, mirrored)

    def reflections(self, fields: Sequence[Floats]) -> list[tuple[int, ...]]:
        """Sets of axes whose reflection together leaves V and the magnetic `fields`, one per axis, as they are."""
        found = []
        off = self.coordinates.inverse_mass
        for count in range(1, self.v.ndim + 1):
            for axes in itertools.combinations(range(self.v.ndim), count):
                signs = np.array([-1 if i in axes else 1 for i in range(self.v.ndim)])
                if any(self.bases[i].grid[0] != -self.bases[i].grid[-1] for i in axes):
                    continue
                kept = _same(self.v, np.flip(self.v, axes)) and not np.any(off * (np.outer(signs, signs) < 0))
                if kept and all(_same(s * f, np.flip(f, axes)) for s, f in zip(signs, fields, strict=False)):
                    found.append(axes)
        return found


def _same(a: Floats, b: Floats) -> bool:
    return bool(np.max(np.abs(a - b)) <= MIRROR * np.max(np.abs(a)))


def _density(axis: Axis, spread: float) -> Floats:
    weights = np.exp(-(axis.energies - axis.energies[0]) / spread)
    return np.asarray(np.abs(axis.functions) ** 2 @ (weights / weights.sum()))


def _averaged(v: Floats, densities: Sequence[Floats], i: int) -> Floats:
    for j in reversed(range(v.ndim)):
        if j != i:
            v = np.tensordot(v, densities[j], axes=(j, 0))
    return v


@dataclass(frozen=True, eq=False)
class ProductBasis:
    """The products `members` of functions of the axes, ascending in the sum of their energies."""

    coordinates: Coordinates
    axes: tuple[Axis, ...]
    members: Integers  # (C, N)

    @staticmethod
    def lowest(coordinates: Coordinates, axes: tuple[Axis, ...], count: int) -> ProductBasis:
        """The `count` products of lowest energy."""
        total = np.zeros(())
        for axis in axes:
            total = np.add.outer(total, axis.energies)
        chosen = np.argsort(total, axis=None, kind="stable")[:count]
        return ProductBasis(coordinates, axes, np.stack(np.unravel_index(chosen, total.shape)))

    def refined(self, factor: int) -> ProductBasis:
        """The same functions at the points of a finer grid; matrices of the potential do not belong to it."""
        return ProductBasis(self.coordinates, tuple(axis.refined(factor) for axis in self.axes), self.members)

    @property
    def size(self) -> int:
        return self.members.shape[1]

    @cached_property
    def _used(self) -> tuple[Numbers, ...]:
        """Functions of each axis that occur, (n_i, M_i)."""
        return tuple(axis.functions[:, : m.max() + 1] for axis, m in zip(self.axes, self.members, strict=True))

    @property
    def periods(self) -> tuple[float | None, ...]:
        """Of the paths."""
        return self.coordinates.problem.periods

    @cached_property
    def energies(self) -> Floats:
        return np.asarray(sum(axis.energies[m] for axis, m in zip(self.axes, self.members, strict=True)))

    # --- what a spectrum asks of its basis ------------------------------------------------------------------
    @cached_property
    def grid(self) -> Floats:
        """(C, P) paths at the points of the product grid."""
        return self._paths([axis.basis.grid for axis in self.axes])

    @cached_property
    def step(self) -> float:
        """Volume of a cell of the grid, in the paths."""
        cell = math.prod(axis.basis.step for axis in self.axes)
        return cell * abs(float(np.linalg.det(self.coordinates.matrix)))

    def on_grid(self, vectors: Numbers) -> Numbers:
        """Wave functions times the root of the cell, (P, k)."""
        return self._at(vectors, self._used)

    def between(self, vectors: Numbers) -> Numbers:
        """The same midway between the points of the grid, on every axis, (P', k)."""
        return self._at(vectors, self._midway)

    def at(self, q: Floats) -> Numbers:
        """Values (K, N) of the basis functions at the paths q, (C, K)."""
        x = np.linalg.solve(self.coordinates.matrix, q)
        values: Numbers = np.ones((x.shape[1], self.size))
        for axis, f, m, y in zip(self.axes, self._used, self.members, x, strict=True):
            values = values * (axis.basis.at(y) @ f)[:, m]
        return np.asarray(values / np.sqrt(abs(np.linalg.det(self.coordinates.matrix))))

    @cached_property
    def _midway(self) -> tuple[Numbers, ...]:
        roots = [np.sqrt(a.basis.step) for a in self.axes]
        return tuple(
            (a.basis.at(_midpoints(a.basis)) @ f) * r for a, f, r in zip(self.axes, self._used, roots, strict=True)
        )

    @cached_property
    def midpoints(self) -> Floats:
        """(C, P') paths midway between the points of the grid."""
        return self._paths([_midpoints(axis.basis) for axis in self.axes])

    def _paths(self, ticks: Sequence[Floats]) -> Floats:
        x = np.stack(np.meshgrid(*ticks, indexing="ij"))
        return self.coordinates.paths(x.reshape(len(ticks), -1))

    def _at(self, vectors: Numbers, functions: Sequence[Numbers]) -> Numbers:
        full = np.zeros((*(f.shape[1] for f in functions), vectors.shape[1]), dtype=vectors.dtype)
        full[tuple(self.members)] = vectors
        for i, f in enumerate(functions):
            full = np.moveaxis(np.tensordot(f, full, axes=(1, i)), 0, i)
        return np.asarray(full.reshape(-1, vectors.shape[1]))

    def from_grid(self, waves: Numbers) -> Numbers:
        """Overlaps (N, k) of the basis functions with waves on the grid, (P, k)."""
        full: Numbers = waves.reshape(*(f.shape[0] for f in self._used), -1)
        for i, f in enumerate(self._used):
            full = np.moveaxis(np.tensordot(f.conj(), full, axes=(0, i)), 0, i)
        return np.asarray(full[tuple(self.members)])

    # --- matrices -------------------------------------------------------------------------------------------
    def matrix(self, values: Floats, chosen: Integers, moved: int | None = None) -> Numbers:
        """<i| f |j> among the `chosen` members, f given on the grid, (n_1, …); with p_k on the right where asked."""
        right = [
            a.moved[:, : f.shape[1]] if k == moved else f
            for k, (a, f) in enumerate(zip(self.axes, self._used, strict=True))
        ]
        return _projected(values, self._used, right, self.members[:, chosen])

    def momentum(self, k: int) -> Numbers:
        """p_k between the functions of an axis, (M, M), Hermitian."""
        f = self._used[k]
        matrix = f.conj().T @ self.axes[k].moved[:, : f.shape[1]]
        return np.asarray((matrix + matrix.conj().T) / 2)


def _midpoints(basis: Basis) -> Floats:
    return basis.grid + basis.step / 2 if isinstance(basis, Circle) else basis.edges[1:-1]


def _projected(values: Floats, left: Sequence[Numbers], right: Sequence[Numbers], members: Integers) -> Numbers:
    """sum over the grid of left products times values times right products, pair by pair of functions of each axis."""
    if len(left) == 2:
        partial = np.tensordot(_pairs(left[0], right[0]).T, values, axes=1) @ _pairs(left[1], right[1])
        first, last = (m[:, None] * f.shape[1] + m[None, :] for m, f in zip(members, right, strict=True))
        return np.asarray(partial[first, last])
    size = members.shape[1]
    result = np.zeros((size, size), dtype=np.result_type(values, *left, *right))
    rows = [np.flatnonzero(members[0] == a) for a in range(left[0].shape[1])]
    reach = [members[1:, r].max(axis=1, initial=0) + 1 for r in rows]
    for a, b in itertools.product(range(len(rows)), repeat=2):
        partial = np.tensordot(left[0][:, a].conj() * right[0][:, b], values, axes=1)
        second, third = (_pairs(left[k][:, : reach[a][k - 1]], right[k][:, : reach[b][k - 1]]) for k in (1, 2))
        block = second.T @ partial @ third
        first, last = (members[k, rows[a]][:, None] * reach[b][k - 1] + members[k, rows[b]] for k in (1, 2))
        result[np.ix_(rows[a], rows[b])] = block[first, last]
    return result


def _pairs(left: Numbers, right: Numbers) -> Numbers:
    return np.asarray((left.conj()[:, :, None] * right[:, None, :]).reshape(len(left), -1))
