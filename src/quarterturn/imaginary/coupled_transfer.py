"""The transfer matrix of two coupled degrees of freedom at the action's spacing, traced over its number of sites.

T = e^{-aV/2} e^{-a p K^-1 p/2} e^{-aV/2} as for one path (Creutz and Freedman, Ann. Phys. 132 (1981) 427, section 3),
projected on the products of one-dimensional eigenfunctions that the continuum uses, and written T = X^+ X with
X = e^{-a p K^-1 p/4} e^{-aV/2}: no eigenvalue of a projection is too large, and all grow towards the exact ones with
the number of products. Two bases must agree, as everywhere in this room.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Numbers
from quarterturn.imaginary.coupled import CoupledPaths
from quarterturn.imaginary.coupled_levels import Matrix, Shape, shaped
from quarterturn.imaginary.problem import Local
from quarterturn.imaginary.product import Integers
from quarterturn.imaginary.product_observables import ProductObserver
from quarterturn.imaginary.traces import chain, pair, together

Floats = NDArray[np.float64]
THERMAL_RESIDUE = 27.0  # states suppressed by exp(-27) = 2e-12 carry nothing in a trace
RESOLVED = 1e-13  # eigenvalues smaller than this share of the largest are rounding
ZERO_ELEMENT = 1e-8  # of all that an operator makes of the vacuum, below which a level counts as not created
ROUNDING = 2.3e-16
AGREEMENT = 2e-12  # change of ln Z and of a E_0 between two bases that counts as none
TOLERATED = 1e-5
CAUTION = 4.0  # the change between two bases may be this much smaller than the error
LEVELS = 8  # that the basis is made for, beside those that carry the trace
MOST_PRODUCTS = 2400
LARGEST = 40_000_000  # numbers in products on the grid


@dataclass(frozen=True, eq=False)
class Link:
    """X of one link in a product basis, by sectors."""

    matrix: Matrix
    spacing: float

    @property
    def bottom(self) -> float:
        return float(self.matrix.grid.v.min())

    @cached_property
    def root(self) -> Floats:
        """exp(-a (V - bottom)/2) on the grid, (P,)."""
        return np.exp(-self.spacing * (self.matrix.grid.v.ravel() - self.bottom) / 2)

    @cached_property
    def kinetic(self) -> Floats:
        """p K^-1 p/2 of the plane waves or sines of the axes, (n_1, …)."""
        momenta = [axis.basis.momenta for axis in self.matrix.basis.axes]
        p = np.stack(np.meshgrid(*momenta, indexing="ij"))
        return np.asarray(np.einsum("i...,ij,j...->...", p, self.matrix.grid.coordinates.inverse_mass, p) / 2)

    def waves(self, vectors: Numbers) -> Numbers:
        """e^{-aV/2} times wave functions, (N, k), in plane waves or sines, (P, k)."""
        basis = self.matrix.basis
        full: Numbers = self.root[:, None] * basis.on_grid(vectors)
        full = full.reshape(*self.kinetic.shape, -1)
        for i, axis in enumerate(basis.axes):
            full = np.moveaxis(np.tensordot(axis.basis.waves, full, axes=(1, i)), 0, i)
        return np.asarray(full.reshape(-1, vectors.shape[1]))

    def block(self, chosen: Integers) -> Numbers:
        """<i|T|j> of some members, in units of exp(-a bottom)."""
        unit = np.zeros((self.matrix.basis.size, len(chosen)))
        unit[chosen, np.arange(len(chosen))] = 1
        x = np.exp(-self.spacing * self.kinetic.ravel() / 2)[:, None] * self.waves(unit)
        return np.asarray(x.conj().T @ x)

    def solve(self) -> tuple[Floats, Numbers]:
        """Eigenvalues, descending, and eigenvectors, (N, N)."""
        basis, sectors = self.matrix.basis, self.matrix.sectors
        found = [np.linalg.eigh(self.block(s)) for s in sectors]
        vectors = np.zeros((basis.size, basis.size), dtype=np.result_type(*(f.eigenvectors for f in found)))
        first = 0
        for sector, (_, part) in zip(sectors, found, strict=True):
            vectors[sector, first : first + len(sector)] = part
            first += len(sector)
        values = np.concatenate([f.eigenvalues for f in found])
        order = np.argsort(-values, kind="stable")
        return np.maximum(values[order], 0.0), vectors[:, order]

    def eigenvalues(self) -> Floats:
        """Descending."""
        return np.sort(np.concatenate([np.linalg.eigvalsh(self.block(s)) for s in self.matrix.sectors]))[::-1]


@dataclass(frozen=True, eq=False)
class CoupledTransfer:
    """Eigenvalues and eigenvectors of the transfer matrix of two paths, and traces over its sites."""

    link: Link
    sites: int
    eigenvalues: Floats  # (N,) descending, in units of exp(-a bottom)
    vectors: Numbers  # (N, N)
    log_partition_error: float
    error: Floats  # (kept,) of `energies`

    @property
    def spacing(self) -> float:
        return self.link.spacing

    @property
    def problem(self) -> CoupledPaths:
        return self.link.matrix.grid.coordinates.problem

    @cached_property
    def energies(self) -> Floats:
        """-ln(lambda_n)/a, ascending, of the eigenvalues above rounding, (kept,)."""
        return np.asarray(self.link.bottom - np.log(self.eigenvalues[: len(self.error)]) / self.spacing)

    @cached_property
    def _ratios(self) -> Floats:
        """Of the states that carry anything between two operators one link apart, (s,)."""
        ratios = self.eigenvalues / self.eigenvalues[0]
        return np.asarray(ratios[ratios > ROUNDING])

    @cached_property
    def probabilities(self) -> Floats:
        """(s,) lambda_n^N / Z."""
        p = self._ratios**self.sites
        return np.asarray(p / p.sum())

    @cached_property
    def _observer(self) -> ProductObserver:
        carried = np.flatnonzero(self.probabilities > 1e-17)
        return ProductObserver(self.link.matrix.basis, self.vectors[:, carried], self.probabilities[carried])

    @property
    def log_partition(self) -> float:
        """ln Z with the measure prod dq sqrt(det K / (2 pi a)^2)."""
        vacuum = np.log(self.eigenvalues[0]) - self.spacing * self.link.bottom
        return float(self.sites * vacuum - np.log(self.probabilities[0]))

    # --- averages -------------------------------------------------------------------------------------------
    def expectation(self, f: Local) -> float:
        """Tr(T^N f) / Tr T^N. Raises SpectrumError where f is too rough for the grid."""
        states, p = self._observer.states, self._observer.weights
        diagonal = np.sum(states.conj() * (self._observer.operator(f) @ states), axis=0)
        return float(np.real(diagonal) @ p / p.sum())

    def correlator(self, f: Local, g: Local, steps: NDArray[np.int_]) -> Numbers:
        """Tr(T^{N-n} f T^n g) / Tr T^N at the separations `steps`, (T,); complex with flux."""
        n = np.atleast_1d(np.asarray(steps, dtype=np.int64)) % self.sites
        left, right = self._elements([f, g])
        result = pair(self._ratios, left, right, n, self.sites) * self.probabilities[0]
        if (n == 0).any():
            result[n == 0] = self.expectation(together([f, g]))
        return np.asarray(result)

    def product(self, groups: Sequence[tuple[int, Local]]) -> float | complex:
        """<prod_k f_k(q_{n_k})> at any site offsets n_k; complex with flux."""
        at: dict[int, list[Local]] = {}
        for n, f in groups:
            at.setdefault(n % self.sites, []).append(f)
        places = sorted(at)
        if len(places) == 1:
            return self.expectation(together(at[places[0]]))
        apart = [*np.diff(places), self.sites - (places[-1] - places[0])]
        elements = self._elements([together(at[n]) for n in places])
        return chain(self._ratios, elements, apart) * float(self.probabilities[0])

    def _elements(self, functions: Sequence[Local]) -> list[Numbers]:
        states = self.vectors[:, : len(self._ratios)]
        return [np.asarray(states.conj().T @ (self._observer.operator(f) @ states)) for f in functions]

    def energy(self) -> float:
        """-d ln Z / d beta at fixed N: the thermodynamic energy; on lines the virial one is equal to it."""
        moved = self._ratios ** (self.sites - 1) @ np.real(np.diag(self._between(self.link.kinetic)))
        return float(moved * self.probabilities[0] / self.eigenvalues[0]) + self.expectation(self.problem.values)

    def gap(self, operators: Sequence[Local]) -> float:
        """Lowest level above the vacuum that one of the operators creates from it.

        Raises SpectrumError where none of the resolved levels has a matrix element with the vacuum.
        """
        vacuum = self.vectors[:, :1]
        observer = ProductObserver(self.link.matrix.basis, vacuum, np.ones(1))
        created = np.zeros(len(self.energies), dtype=bool)
        for f in operators:
            made = observer.operator(f) @ vacuum
            elements = np.abs(self.vectors.conj().T @ made)[:, 0]
            least = max(ZERO_ELEMENT * np.linalg.norm(elements[1:]), 64 * ROUNDING * np.linalg.norm(made))
            created |= elements[: len(created)] > least
        found = np.flatnonzero(created[1:]) + 1
        if not len(found):
            raise SpectrumError("the operators create no state above the vacuum that this spacing resolves")
        return float(self.energies[found[0]] - self.energies[0])

    # --- winding --------------------------------------------------------------------------------------------
    def average_phase(self) -> float:
        """Z(flux) / Z(0): the average of the phase in the ensemble without flux."""
        if not any(self.problem.fluxes):
            return 1.0
        without = coupled_transfer(replace(self.problem, fluxes=(0.0,) * self.problem.size), self.spacing, self.sites)
        return float(np.exp(self.log_partition - without.log_partition))

    def winding_second_moment(self, axis: int = 0) -> float:
        """<Q^2> of the winding number of one angle, -Z''(theta)/Z(theta) with theta = flux times period.

        Raises SpectrumError for a line.
        """
        period = self.problem.periods[axis]
        if period is None:
            raise SpectrumError("a path on the line has no winding number")
        matrix = self.link.matrix
        momenta = np.meshgrid(*[a.basis.momenta for a in matrix.basis.axes], indexing="ij")
        inverse = matrix.grid.coordinates.inverse_mass
        speed = self.spacing * np.tensordot(inverse[axis], np.stack(momenta), axes=1)
        first, second = self._between(speed), self._between(speed**2 - self.spacing * inverse[axis, axis])
        r, largest = self._ratios, self.eigenvalues[0]
        one = np.sum(r ** (self.sites - 1) * np.real(np.diag(second)))
        powers = r[:, None] ** np.arange(self.sites - 1)[None, :]
        two = np.sum(np.abs(first) ** 2 * (powers @ powers[:, ::-1].T)) / largest
        return float(-self.sites * (one + two) * self.probabilities[0] / largest / period**2)

    def _between(self, weight: Floats) -> Numbers:
        """T with each momentum weighted, between the eigenvectors, (s, s), in the units of `eigenvalues`."""
        waves = self.link.waves(self.vectors[:, : len(self._ratios)])
        weights = (weight * np.exp(-self.spacing * self.link.kinetic)).ravel()
        return np.asarray(waves.conj().T @ (weights[:, None] * waves))


def coupled_transfer(problem: CoupledPaths, spacing: float, sites: int) -> CoupledTransfer:
    """Solve the transfer matrix of two paths.

    Parameters
    ----------
    problem
        Two degrees of freedom on lines or circles, without a drift that depends on them.
    spacing
        Of the lattice, in units of the notation.
    sites
        Number N of periodic sites, at least 1; beta = N times the spacing.

    Raises
    ------
    SpectrumError
        Three paths, a magnetic term, a mass that mixes a line with an angle, a potential that does not confine, or a
        temperature so high, or a potential so rough, that no basis of moderate size converges.
    """
    if not (spacing > 0 and np.isfinite(spacing)) or sites < 1:
        raise SpectrumError(f"a lattice needs a positive spacing and at least one site, got {spacing} and {sites}")
    _require_separable_links(problem)
    shape, _, _ = shaped(problem, LEVELS, THERMAL_RESIDUE / (spacing * sites))
    _, link, values, vectors, trace, logs = _settled(shape, spacing, sites)
    if not logs[0] <= TOLERATED:
        raise SpectrumError(
            f"the transfer matrix does not settle: {len(values)} products still change it by {logs[0]:.2g}; "
            "the potential is too rough, or singular"
        )
    rounding = 8 * ROUNDING * values[0] / values[: len(logs)]
    return CoupledTransfer(
        link=link,
        sites=sites,
        eigenvalues=values,
        vectors=vectors,
        log_partition_error=CAUTION * trace + 8 * ROUNDING * sites,
        error=(CAUTION * logs + rounding) / spacing + ROUNDING * abs(link.bottom),
    )


def _require_separable_links(problem: CoupledPaths) -> None:
    if problem.size != 2:
        raise SpectrumError(f"the transfer matrix is solved for one and two paths, not for {problem.size}")
    if problem.magnetic:
        raise SpectrumError("the transfer matrix is solved without magnetic terms that depend on the paths")
    if len(problem.lines) == 1 and problem.mass[0, 1]:
        raise SpectrumError("the transfer matrix is not solved for a mass that mixes a line with an angle")


def _settled(shape: Shape, spacing: float, sites: int) -> tuple[Shape, Link, Floats, Numbers, float, Floats]:
    """Enlarge the basis until ln Z and the vacuum agree with those of a smaller one, or it is as large as it may be."""
    while True:
        link = Link(shape.matrix, spacing)
        if shape.products > MOST_PRODUCTS or shape.products * link.matrix.grid.v.size > LARGEST:
            raise SpectrumError(
                f"the transfer matrix of two paths at beta = {spacing * sites:g} needs more than {MOST_PRODUCTS} "
                "products of functions: the temperature is too high, or the potential too wide"
            )
        values, vectors = link.solve()
        other = Link(shape.smaller().matrix, spacing)
        fewer = np.maximum(other.eigenvalues(), 0.0) * np.exp(-spacing * (other.bottom - link.bottom))
        size = min(len(fewer), int(np.count_nonzero(values > RESOLVED * values[0])))
        logs = np.abs(np.log(values[:size] / np.maximum(fewer[:size], 1e-300)))
        trace = abs(_log_trace(values, sites) - _log_trace(fewer, sites))
        larger = shape.larger()
        if max(trace, float(logs[0])) <= AGREEMENT * (1 + 4e-4 * sites) or larger.products > MOST_PRODUCTS:
            return shape, link, values, vectors, trace, logs
        shape = larger


def _log_trace(values: Floats, sites: int) -> float:
    return float(sites * np.log(values[0]) + np.log(np.sum((values / values[0]) ** sites)))
