"""Levels of two and three coupled degrees of freedom in the continuum.

Products of self-consistent one-dimensional eigenfunctions, truncated by energy, fall into sectors by the reflections
that the action has on the grid; each is diagonalised densely, so that no member of a degenerate pair is missed. The
same is done once more on a coarser grid in a smaller box with fewer products, and the change is the error.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Numbers
from quarterturn.imaginary.coupled import Coordinates, CoupledPaths
from quarterturn.imaginary.extent import INSTEAD, Extent, Region, curvature, lowest, settle
from quarterturn.imaginary.product import Grid, Integers, ProductBasis
from quarterturn.imaginary.spectrum import Spectrum

Floats = NDArray[np.float64]
AGREEMENT = 1e-11  # change between two bases, relative to the height of the levels, that counts as none
FAR = 1e-7  # the same from which other coordinates are tried
LOOSE = 1e-5  # the same for the highest states of a thermal sum
TOLERATED = 1e-3  # the largest error that is reported as one
CONVERGED = 1e-9  # below which a level may enter sums
ROUNDING = 2.3e-16
MOST_PRODUCTS = {2: 2000, 3: 3000}
FEWER = 0.8  # products in the second basis
STALLED = 0.7  # less gain than to this share from an enlargement: the potential is rough, and errors are what they are
THERMAL_RESIDUE = 27.0  # states suppressed by more than exp(-27) = 2e-12, for each of several paths


@dataclass(frozen=True, eq=False)
class Matrix:
    """The Hamiltonian in a product basis, by sectors."""

    grid: Grid
    basis: ProductBasis

    @cached_property
    def _currents(self) -> list[Floats]:
        """K^-1 A on the grid, per axis; empty without a magnetic term."""
        grid = self.grid
        if not grid.coordinates.problem.magnetic:
            return []
        return list(np.tensordot(grid.coordinates.inverse_mass, grid.coordinates.drift(grid.points), axes=1))

    @cached_property
    def sectors(self) -> list[Integers]:
        """Members of the basis by their signs under the reflections of the action."""
        parities = [axis.parities[m] for axis, m in zip(self.basis.axes, self.basis.members, strict=True)]
        label = np.zeros(self.basis.size, dtype=np.int_)
        for axes in self.grid.reflections(self._currents):
            if all(self.basis.axes[i].mirrored for i in axes):
                label = 2 * label + (np.prod([parities[i] for i in axes], axis=0) > 0)
        return [np.flatnonzero(label == k) for k in np.unique(label)]

    @cached_property
    def rest(self) -> Floats:
        """V without the reference potentials, on the grid."""
        rest = self.grid.v.copy()
        for i, axis in enumerate(self.basis.axes):
            rest -= axis.reference.reshape([-1 if j == i else 1 for j in range(rest.ndim)])
        return rest

    def block(self, chosen: Integers) -> Numbers:
        """<i|H|j> of some members."""
        matrix = self.basis.matrix(self.rest, chosen)
        matrix[np.diag_indices(len(matrix))] += self.basis.energies[chosen]
        if self.grid.coordinates.mixed:
            matrix = matrix + self._mixed(chosen)
        for k, current in enumerate(self._currents):
            if current.any():
                product = self.basis.matrix(current, chosen, moved=k)
                matrix = matrix - (product + product.conj().T) / 2
        return matrix

    def _mixed(self, chosen: Integers) -> Numbers:
        """sum over i < j of (K^-1)_ij p_i p_j."""
        inverse, members = self.grid.coordinates.inverse_mass, self.basis.members[:, chosen]
        total: Numbers = np.zeros((len(chosen), len(chosen)))
        for i, j in zip(*np.nonzero(np.triu(inverse, 1)), strict=True):
            term = inverse[i, j] * np.ones_like(total)
            for k, m in enumerate(members):
                one = self.basis.momentum(k) if k in (i, j) else np.eye(m.max() + 1)
                term = term * one[m[:, None], m[None, :]]
            total = total + term
        return total.real if not np.iscomplexobj(total) or not total.imag.any() else total

    def values(self) -> Floats:
        """Eigenvalues, ascending."""
        return np.sort(np.concatenate([np.linalg.eigvalsh(self.block(s)) for s in self.sectors]))

    def solve(self) -> tuple[Floats, Numbers]:
        """Eigenvalues, ascending, and eigenvectors, (N, N)."""
        found = [np.linalg.eigh(self.block(s)) for s in self.sectors]
        vectors = np.zeros((self.basis.size, self.basis.size), dtype=np.result_type(*(f.eigenvectors for f in found)))
        first = 0
        for sector, (values, part) in zip(self.sectors, found, strict=True):
            vectors[sector, first : first + len(values)] = part
            first += len(values)
        values = np.concatenate([f.eigenvalues for f in found])
        order = np.argsort(values, kind="stable")
        return values[order], vectors[:, order]

    @cached_property
    def rounding(self) -> float:
        """Of one eigenvalue: the precision times the largest energies of the basis."""
        top = float(self.basis.energies[-1])
        return ROUNDING * 8 * (abs(top) + abs(float(self.grid.v.min())) + top - float(self.basis.energies[0]))


@dataclass(frozen=True, eq=False)
class Shape:
    """Everything that a basis is made from."""

    coordinates: Coordinates
    extents: tuple[Extent, ...]
    spread: float
    products: int

    @cached_property
    def matrix(self) -> Matrix:
        grid = Grid.over(self.coordinates, self.extents)
        return Matrix(grid, ProductBasis.lowest(self.coordinates, grid.axes(self.spread), self.products))

    def smaller(self) -> Shape:
        """A second opinion."""
        return self._scaled(0.965, 0.965, FEWER)

    def larger(self) -> Shape:
        return self._scaled(1.05, 1.08, 1.45)

    def _scaled(self, reach: float, density: float, products: float) -> Shape:
        extents = tuple(e.scaled(reach, density) for e in self.extents)
        return replace(self, extents=extents, products=math.ceil(self.products * products))


def shaped(
    problem: CoupledPaths, count: float, above: float = 0.0
) -> tuple[Shape, Region, Callable[[], Iterator[Shape]]]:
    """A basis for levels up to the `count`th, and `above` more in energy; and the same in other coordinates.

    Raises SpectrumError where the potential does not confine.
    """
    centre, reach = lowest(problem)
    forms = [curvature(problem, centre, reach)] if len(problem.lines) > 1 else []
    coordinates = Coordinates.candidates(problem, forms)[0]
    region, extents = settle(coordinates, centre, reach, count + 1.5, above)
    energy = region.energy_of(count + 1.5) + above
    number = region.number(energy)
    products = math.ceil({2: 60 + 8 * number, 3: 260 + 17 * number}[problem.size])
    spread = (energy - region.bottom) / (2 * problem.size)

    def others() -> Iterator[Shape]:
        for other in Coordinates.candidates(problem, [*forms, region.form(energy)]) if forms else []:
            if not np.array_equal(other.matrix, coordinates.matrix):
                moved = settle(other, centre, reach, count + 1.5, above)[1]
                yield Shape(other, tuple(moved), spread, products)

    return Shape(coordinates, tuple(extents), spread, products), region, others


@dataclass(frozen=True, eq=False)
class Attempt:
    """The levels in one basis, and their changes from a smaller one."""

    shape: Shape
    values: Floats
    vectors: Numbers
    change: Floats

    @staticmethod
    def of(shape: Shape) -> Attempt:
        values, vectors = shape.matrix.solve()
        other = shape.smaller().matrix.values()
        size = min(len(values), len(other))
        return Attempt(shape, values, vectors, np.abs(values[:size] - other[:size]))

    def worst(self, count: int) -> float:
        return float(self.change[:count].max())

    def height(self, count: int) -> float:
        return float(self.values[count - 1]) - float(self.shape.matrix.grid.v.min())

    def agrees(self, count: int, agreement: float) -> bool:
        return self.worst(count) <= agreement * self.height(count) + 10 * self.shape.matrix.rounding


def coupled_levels(problem: CoupledPaths, count: int, agreement: float = AGREEMENT) -> Spectrum:
    """The lowest `count` levels of two or three degrees of freedom.

    Parameters
    ----------
    problem
        Lines, circles, or both, with any constant mass matrix and magnetic terms.
    count
        Number of levels, at least 1.
    agreement
        Change between two bases, relative to the height of the levels, at which enlarging them ends.

    Returns
    -------
    Spectrum
        Energies, shape (count,), ascending, each with an error estimate: its change between two bases and rounding.

    Raises
    ------
    SpectrumError
        The potential does not confine, is too singular or rough, or so many levels are beyond the basis.
    """
    if count < 1:
        raise SpectrumError(f"at least one level must be asked for, not {count}")
    shape, region, others = shaped(problem, count)
    most = MOST_PRODUCTS[problem.size]
    if shape.products > most:
        raise SpectrumError(
            f"{count} levels of {problem.size} coupled paths need more than {most} products of functions: ask for "
            f"fewer levels, or {INSTEAD.split(',')[0]}"
        )
    found, previous = _enlarged(shape, others, count, agreement)
    errors = _honest(found.change, found.worst(count), previous) + found.shape.matrix.rounding
    if not np.all(errors[:count] <= TOLERATED * found.height(count)):
        raise SpectrumError(
            f"the levels do not settle: {len(found.values)} products still change them by {found.worst(count):.2g}; "
            f"the potential is too rough, or singular; {INSTEAD}"
        )
    return _spectrum(problem, found, region, errors, count, agreement)


def _enlarged(
    shape: Shape, others: Callable[[], Iterator[Shape]], count: int, agreement: float
) -> tuple[Attempt, float]:
    """The first basis that agrees with a smaller one, and what the one before it changed.

    Where the first guess at coordinates is far off, the others are tried at the same size, and the best is enlarged.
    """
    found, previous = Attempt.of(shape), np.inf
    if not found.agrees(count, max(agreement, FAR)):
        found = min([found, *map(Attempt.of, others())], key=lambda attempt: attempt.worst(count))
    while not found.agrees(count, agreement):
        worst, larger = found.worst(count), found.shape.larger()
        stalled = STALLED * previous < worst <= TOLERATED * found.height(count) / 100
        if stalled or larger.products > MOST_PRODUCTS[larger.coordinates.problem.size]:
            break
        found, previous = Attempt.of(larger), worst
    return found, previous


def _honest(change: Floats, worst: float, previous: float) -> Floats:
    """The change to the smaller basis bounds the error where it falls fast; where it falls slowly, the rest adds up."""
    ratio = min(worst / previous, 0.9) if np.isfinite(previous) else 0.0
    return np.asarray(change / (1 - ratio) * (1 if ratio < 0.1 else 4))


def _spectrum(
    problem: CoupledPaths, found: Attempt, region: Region, errors: Floats, count: int, agreement: float
) -> Spectrum:
    values, vectors, matrix, height = found.values, found.vectors, found.shape.matrix, found.height(count)
    limit = max(CONVERGED, agreement) * (values[: len(errors)] - values[0] + height)
    good = errors <= limit
    reliable = max(count, len(good) if good.all() else int(np.argmin(good)))

    def extended(above: float) -> Spectrum:
        return coupled_levels(problem, math.ceil(region.number(float(values[0]) + above)) + 2, LOOSE)

    def refused(kinetic: float) -> Spectrum:
        raise SpectrumError("observables with kinks are not resolved with several paths")

    return Spectrum(
        energies=values[:count],
        errors=errors[:count],
        basis=matrix.basis,
        mass=float(matrix.grid.coordinates.masses.min()),
        values=values,
        vectors=vectors,
        reliable=reliable,
        threshold=np.inf,
        facts=_facts(matrix),
        extend=extended,
        refine=refused,
        residue=THERMAL_RESIDUE,
    )


def _facts(matrix: Matrix) -> dict[str, str]:
    basis = matrix.basis
    points: Sequence[int] = matrix.grid.v.shape
    sectors = f", in {len(matrix.sectors)} sectors of reflection" if len(matrix.sectors) > 1 else ""
    turned = not np.array_equal(matrix.grid.coordinates.matrix, np.eye(len(points)))
    return {
        "basis": f"{basis.size} products of one-path functions{sectors}",
        "grid": " x ".join(str(n) for n in points) + (" in normal modes" if turned else ""),
    }
