"""The lattice's own answer: the transfer matrix at the action's spacing, traced over its number of sites.

T = e^{-aV/2} K e^{-aV/2} with K the kernel of one link; averages over N periodic sites are traces of T^N. On the line
K(q, q') = sqrt(m/2 pi a) exp(-m (q - q')^2 / 2a) by the trapezoidal rule, which converges faster than any power for
these analytic kernels (Trefethen and Weideman, SIAM Rev. 56 (2014) 385); on the circle the sum over windings of each
link makes K = exp(-a (p - A)^2 / 2m) exactly. Creutz and Freedman, Ann. Phys. 132 (1981) 427, section 3.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.problem import OnePath
from quarterturn.imaginary.region import Well, extent, find_well

Floats = NDArray[np.float64]
Local = Callable[[Floats], Floats]
MOST_POINTS = 2400
RESOLVED = 1e-13  # eigenvalues smaller than this share of the largest are rounding
STEP = 0.42  # grid step in units of the width of the kernel sqrt(a/m)
ZERO_ELEMENT = 1e-7  # of the operator's size, below which a matrix element counts as zero


@dataclass(frozen=True, eq=False)
class Transfer:
    """Eigenvalues and eigenvectors of one transfer matrix, and traces over `sites`."""

    problem: OnePath
    spacing: float
    sites: int
    grid: Floats  # (M,)
    step: float
    eigenvalues: Floats  # (kept,) descending, those above rounding, in units of exp(shift)
    vectors: NDArray  # (M, kept), orthonormal
    shift: float  # log of the factor taken out of T
    error: float  # relative, from two grids

    @property
    def energies(self) -> Floats:
        """-ln(lambda_n)/a, ascending, (kept,)."""
        return np.asarray(-(np.log(self.eigenvalues) + self.shift) / self.spacing)

    @property
    def _ratios(self) -> Floats:
        return self.eigenvalues / self.eigenvalues[0]

    @property
    def log_partition(self) -> float:
        """ln Z with the measure prod dq sqrt(m/2 pi a)."""
        largest = self.sites * (np.log(self.eigenvalues[0]) + self.shift)
        return float(largest + np.log(np.sum(self._ratios**self.sites)))

    def matrix(self, f: Local) -> NDArray:
        """<m|f(q)|n>."""
        return np.asarray(self.vectors.conj().T @ (np.asarray(f(self.grid))[:, None] * self.vectors))

    def expectation(self, f: Local) -> float:
        """Tr(T^N f) / Tr T^N."""
        p = self._ratios**self.sites
        density = (np.abs(self.vectors) ** 2) @ (p / p.sum())
        return float(np.sum(np.asarray(f(self.grid)) * density))

    def correlator(self, f: Local, g: Local, steps: NDArray[np.int_]) -> Floats:
        """Tr(T^{N-n} f T^n g) / Tr T^N at the separations `steps`, (T,), the part even in n."""
        a, b = self.matrix(f), self.matrix(g)
        product = a * b.T
        r, total = self._ratios, np.sum(self._ratios**self.sites)
        n = np.abs(np.asarray(steps))
        if (n > self.sites).any():
            raise SpectrumError(f"a separation beyond the {self.sites} sites")
        outer, inner = r[None, :] ** (self.sites - n[:, None]), r[None, :] ** n[:, None]
        return np.real(np.einsum("tm,mn,tn->t", outer, product, inner)) / total

    def product(self, groups: Sequence[tuple[int, Local]]) -> float:
        """<prod_k f_k(q_{n_k})> for any set of site offsets."""
        placed = sorted(((n % self.sites, f) for n, f in groups), key=lambda item: item[0])
        r = self._ratios
        start, chain = placed[0][0], self.matrix(placed[0][1])
        last = start
        for n, f in placed[1:]:
            chain = (chain * r[None, :] ** (n - last)) @ self.matrix(f)
            last = n
        closing = r ** (self.sites - (last - start))
        return float(np.real(np.sum(np.diag(chain) * closing)) / np.sum(r**self.sites))

    def energy(self) -> float:
        """-d ln Z / d beta at fixed N: the thermodynamic energy, equal to the virial one on the line."""
        if self.problem.period is None:
            return self.expectation(self._virial)
        p = self._ratios ** (self.sites - 1)
        kinetic = np.sum(p * np.real(np.diag(self._between("energy")))) / self.eigenvalues[0]
        return float(kinetic / np.sum(self._ratios**self.sites)) + self.expectation(self.problem.values)

    def _virial(self, q: Floats) -> Floats:
        """V + q V'/2, the derivative by differences of the highest order that rounding allows."""
        h = 1e-3 * max(1e-12, float(self.grid[-1] - self.grid[0]) / 20)
        v = self.problem.values_or_wall
        slope = (
            sum(c * (v(q + k * h) - v(q - k * h)) for k, c in ((1, 4 / 5), (2, -1 / 5), (3, 4 / 105), (4, -1 / 280)))
            / h
        )
        value = v(q) + q * slope / 2
        return np.where(np.abs(v(q)) > 1e100, 0.0, value)

    def gap(self, operators: Sequence[Local]) -> float:
        """Lowest level above the vacuum that one of the operators creates.

        Raises SpectrumError where none of the resolved levels has a matrix element with the vacuum.
        """
        for f in operators:
            if not np.isfinite(np.asarray(f(self.grid))).all():
                raise SpectrumError("an operator is not finite on the grid")
        elements = [np.abs(self.matrix(f)[0]) for f in operators]
        sizes = [np.sqrt(np.sum(e**2)) for e in elements]
        for n in range(1, len(self.eigenvalues)):
            if any(e[n] > ZERO_ELEMENT * size for e, size in zip(elements, sizes, strict=True)):
                return float(self.energies[n] - self.energies[0])
        raise SpectrumError("the operators create no state above the vacuum that the lattice resolves")

    # --- winding --------------------------------------------------------------------------------------------
    def average_phase(self) -> float:
        """Z(flux) / Z(0)."""
        if self.problem.flux == 0 or self.problem.period is None:
            return 1.0
        without = transfer(_with_flux(self.problem, 0.0), self.spacing, self.sites)
        return float(np.exp(self.log_partition - without.log_partition))

    def winding_second_moment(self) -> float:
        """<Q^2> of the winding number, -Z''(theta)/Z(theta) with theta = flux times period, in closed form.

        Z'' = N Tr(T^{N-1} T'') + N sum_k Tr(T^k T' T^{N-2-k} T'), evaluated between eigenvectors.
        """
        if self.problem.period is None:
            raise SpectrumError("a path on the line has no winding number")
        first, second = (self._between(weight) for weight in ("first", "second"))
        r, n = self._ratios, self.sites
        powers = r[:, None] ** np.arange(n - 1)[None, :]
        both = np.real(first * first.T) * (powers @ powers[:, ::-1].T) / self.eigenvalues[0]
        single = r ** (n - 1) * np.real(np.diag(second))
        z2 = n * (np.sum(single) + np.sum(both)) / self.eigenvalues[0] / np.sum(r**n)
        return float(-z2 / self.problem.period**2)

    def _between(self, weight: str) -> NDArray:
        """A derivative of T by its link, between the eigenvectors, in the units of `eigenvalues`."""
        link = _circle_link(self.problem, self.spacing, len(self.grid), weight)
        half = np.exp(-self.spacing * self.problem.values(self.grid) / 2 - self.shift / 2)
        return np.asarray(self.vectors.conj().T @ (half[:, None] * link * half[None, :]) @ self.vectors)


def _with_flux(problem: OnePath, flux: float) -> OnePath:
    return OnePath(problem.mass, problem.potential, problem.period, flux, problem.even)


def transfer(problem: OnePath, spacing: float, sites: int) -> Transfer:
    """Solve the transfer matrix of one path at `spacing` on `sites` periodic sites.

    Raises SpectrumError where the potential confines nothing or the grid would be too large.
    """
    if problem.period is not None:
        return _circle(problem, spacing, sites)
    well = find_well(problem)
    # the discretised weight confines wherever e^{-aV} does; where V has a finite limit it does not
    if np.isfinite(well.threshold):
        raise SpectrumError("the potential does not confine: on a finite lattice the trace diverges with the box")
    beta = spacing * sites
    thermal = max(32.0 / beta, 12 * well.energy_scale(problem.mass), 3.0 / spacing)
    low, high = _box(problem, well, well.bottom + thermal, spacing)
    return _line(problem, spacing, sites, low, high)


def _box(problem: OnePath, well: Well, energy: float, spacing: float) -> tuple[float, float]:
    low, high = extent(problem, well, energy, 22.0)
    # where a V is large the factor e^{-aV} alone ends the path
    q = np.linspace(low, high, 4001)
    inside = np.flatnonzero(spacing * (problem.values_or_wall(q) - well.bottom) < 90.0)
    return float(q[max(inside[0] - 1, 0)]), float(q[min(inside[-1] + 1, 4000)])


def _line(problem: OnePath, spacing: float, sites: int, low: float, high: float) -> Transfer:
    points = int((high - low) / (STEP * np.sqrt(spacing / problem.mass))) + 40
    if points > MOST_POINTS:
        raise SpectrumError(f"the transfer matrix would need {points} points at this spacing, more than {MOST_POINTS}")
    q, h = np.linspace(low, high, points, retstep=True)
    v = problem.values_or_wall(q)
    bottom = float(v.min())
    half = np.exp(-np.minimum(spacing * (v - bottom) / 2, 700.0))
    kernel = np.exp(-np.minimum(problem.mass * (q[:, None] - q[None, :]) ** 2 / (2 * spacing), 700.0))
    matrix = half[:, None] * kernel * half[None, :] * (np.sqrt(problem.mass / (2 * np.pi * spacing)) * h)
    return _solved(problem, spacing, sites, q, float(h), matrix, -spacing * bottom)


def _circle(problem: OnePath, spacing: float, sites: int) -> Transfer:
    assert problem.period is not None
    width = np.sqrt(spacing / problem.mass)
    points = max(64, int(problem.period / (STEP * width)) + 40) | 1
    if points > MOST_POINTS:
        raise SpectrumError(f"the transfer matrix would need {points} points at this spacing, more than {MOST_POINTS}")
    q = np.arange(points) * problem.period / points
    v = problem.values(q)
    bottom = float(v.min())
    half = np.exp(-spacing * (v - bottom) / 2)
    matrix = half[:, None] * _circle_link(problem, spacing, points, "one") * half[None, :]
    return _solved(problem, spacing, sites, q, problem.period / points, matrix, -spacing * bottom)


def _circle_link(problem: OnePath, spacing: float, points: int, weight: str) -> NDArray:
    """The kernel of one link on the grid of the circle.

    weight: one; energy (each wave times its kinetic energy); first, second (derivatives by the flux A).
    """
    assert problem.period is not None
    shift = int(np.round(problem.flux * problem.period / (2 * np.pi)))
    k = np.arange(-(points // 2), points // 2 + 1) + shift
    momenta = 2 * np.pi * k / problem.period - problem.flux
    kinetic = momenta**2 / (2 * problem.mass)
    speed = spacing * momenta / problem.mass
    weights = {"one": 1.0, "energy": kinetic, "first": speed, "second": speed**2 - spacing / problem.mass}
    factor = np.exp(-spacing * kinetic) * weights[weight]
    separation = np.arange(points) * problem.period / points
    row = np.exp(2j * np.pi * np.outer(separation, k) / problem.period) @ factor / points
    index = (np.arange(points)[:, None] - np.arange(points)[None, :]) % points
    link = row[index]
    return link.real if problem.flux == 0 and weight != "first" else link


def _solved(
    problem: OnePath, spacing: float, sites: int, q: Floats, h: float, matrix: NDArray, shift: float
) -> Transfer:
    values, vectors = np.linalg.eigh((matrix + matrix.conj().T) / 2)
    order = np.argsort(-values)
    values, vectors = values[order], vectors[:, order]
    kept = int(np.count_nonzero(values > RESOLVED * values[0]))
    return Transfer(problem, spacing, sites, q, h, values[:kept], vectors[:, :kept], shift, 1e-13)
