"""The lattice's own answer: the transfer matrix at the action's spacing, traced over its number of sites.

The weight exp(-sum a [m/2 ((q_{i+1} - q_i)/a)^2 + V(q_i)]) of N periodic sites is the trace of T^N with
T = e^{-aV/2} e^{-a p^2/2m} e^{-aV/2}: the Gaussian of one link is exp(-a p^2/2m) exactly, on the circle too, where the
sum over windings of each link leaves integer momenta (Creutz and Freedman, Ann. Phys. 132 (1981) 427, section 3).
In the bases of this room both factors are closed forms. At equal times sums over states are complete.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Basis, Numbers, diagonalise, eigenvalues
from quarterturn.imaginary.fitting import (
    MOST_POINTS,
    STALLED,
    TAIL,
    Fit,
    Frame,
    Tails,
    around,
    circle_frame,
    fit,
    line_frame,
)
from quarterturn.imaginary.landscape import energy_below, survey
from quarterturn.imaginary.observables import Diagonal, Observer, integrated
from quarterturn.imaginary.problem import Local, OnePath
from quarterturn.imaginary.traces import chain, pair, together

Floats = NDArray[np.float64]
CLEAR = 1e-7  # eigenvectors of smaller ones are disturbed by rounding, more than tails may be
RESOLVED = 1e-13  # eigenvalues smaller than this share of the largest are rounding
THERMAL_RESIDUE = 34.0  # states suppressed by exp(-34) = 2e-15 carry nothing in a trace
ZERO_ELEMENT = 1e-8  # of all that an operator makes of the vacuum, the part below which a level counts as not created
ROUNDING = 2.3e-16
AGREEMENT = 2e-13  # change of ln Z and of the lowest energies times beta between two bases that counts as none
TOLERATED = 1e-4
LEVELS = 8  # that the basis is made for, beside those that carry the trace
MOST_ROUGH = 420  # points for potentials with kinks or steps


@dataclass(frozen=True, eq=False)
class Transfer:
    """Eigenvalues and eigenvectors of one transfer matrix, and traces over its sites."""

    link: Link
    frame: Frame
    eigenvalues: Floats  # (M,) descending, in units of exp(-a bottom); clipped at zero
    vectors: Numbers  # (M, M) orthonormal
    log_partition_error: float
    error: Floats  # (kept,) of `energies`: the change between two bases, and rounding
    _finer: dict[int, Transfer] = field(default_factory=dict, repr=False)

    @property
    def spacing(self) -> float:
        return self.link.spacing

    @property
    def sites(self) -> int:
        return self.link.sites

    @property
    def basis(self) -> Basis:
        return self.frame.basis

    @property
    def grid(self) -> Floats:
        """(M,)."""
        return self.basis.grid

    @cached_property
    def energies(self) -> Floats:
        """-ln(lambda_n)/a, ascending, of the eigenvalues above rounding, (kept,)."""
        kept = self.eigenvalues[: len(self.error)]
        return np.asarray(self.link.bottom - np.log(kept) / self.spacing)

    @cached_property
    def _ratios(self) -> Floats:
        return self.eigenvalues / self.eigenvalues[0]

    @cached_property
    def probabilities(self) -> Floats:
        """(M,) lambda_n^N / Z."""
        p = self._ratios**self.sites
        return np.asarray(p / p.sum())

    @cached_property
    def _observer(self) -> Observer:
        carried = self.probabilities > 1e-17
        return Observer(self.basis, self.vectors[:, carried], self.probabilities[carried])

    @property
    def log_partition(self) -> float:
        """ln Z with the measure prod dq sqrt(m / 2 pi a)."""
        vacuum = np.log(self.eigenvalues[0]) - self.spacing * self.link.bottom
        return float(self.sites * vacuum - np.log(self.probabilities[0]))

    # --- averages -------------------------------------------------------------------------------------------
    def expectation(self, f: Local) -> float:
        """Tr(T^N f) / Tr T^N."""
        states, p = self._observer.states, self._observer.weights
        diagonal = np.sum(states.conj() * (self._observer.operator(f) @ states), axis=0)
        return float(np.real(diagonal) @ p / p.sum())

    def correlator(self, f: Local, g: Local, steps: NDArray[np.int_]) -> Numbers:
        """Tr(T^{N-n} f T^n g) / Tr T^N at the separations `steps`, (T,); complex with flux.

        A negative separation is the same one counted from the other side of the periodic lattice.
        """
        n = np.atleast_1d(np.asarray(steps, dtype=np.int64)) % self.sites
        apart = np.minimum(n, self.sites - n)
        solution, (left, right) = self._elements([f, g], int(np.min(apart[apart > 0], initial=self.sites)))
        result = pair(solution._ratios, left, right, n, self.sites) * solution.probabilities[0]
        if (n == 0).any():
            result[n == 0] = self.expectation(together([f, g]))
        return np.asarray(result)

    def product(self, groups: Sequence[tuple[int, Local]]) -> float | complex:
        """<prod_k f_k(q_{n_k})> at any site offsets n_k; complex with flux."""
        at: dict[int, list[Local]] = {}
        for n, f in groups:
            at.setdefault(n % self.sites, []).append(f)
        if not at:
            return 1.0
        places = sorted(at)
        if len(places) == 1:
            return self.expectation(together(at[places[0]]))
        apart = [*np.diff(places), self.sites - (places[-1] - places[0])]
        solution, elements = self._elements([together(at[n]) for n in places], int(min(apart)))
        return chain(solution._ratios, elements, apart) * float(solution.probabilities[0])

    def _elements(self, functions: Sequence[Local], least: int) -> tuple[Transfer, list[Numbers]]:
        """<m|f(q)|n> of each function, in a basis that is complete enough for `least` links between them.

        A smooth function makes no wave that the basis does not hold; a kink makes arbitrarily fast ones, which only
        the links damp. Raises SpectrumError where too many functions would be needed.
        """
        operators = [self._observer.operator(f) for f in functions]
        if not all(isinstance(o, Diagonal) for o in operators):
            fastest = np.sqrt(2 * THERMAL_RESIDUE * self.link.problem.mass / (least * self.spacing))
            ratio = float(fastest / np.max(np.abs(self.basis.momenta)))
            if ratio > 1:
                return self._finer_by(ratio, least)._elements(functions, least)
        return self, [np.asarray(self.vectors.conj().T @ (o @ self.vectors)) for o in operators]

    def _finer_by(self, ratio: float, least: int) -> Transfer:
        frame = self.frame.finer(1.02 * ratio)
        if frame.points > MOST_POINTS:
            raise SpectrumError(
                f"an observable with a kink or a step is not resolved at t = {least * self.spacing:g}: "
                f"it needs {frame.points} points, more than {MOST_POINTS}"
            )
        if frame.points not in self._finer:
            values, vectors = self.link.solve(frame)
            self._finer[frame.points] = replace(self, frame=frame, eigenvalues=values, vectors=vectors, _finer={})
        return self._finer[frame.points]

    def energy(self) -> float:
        """-d ln Z / d beta at fixed N: the thermodynamic energy; on the line the virial one is equal to it."""
        kinetic = self.basis.momenta**2 / (2 * self.link.problem.mass)
        moved = self._ratios ** (self.sites - 1) @ np.real(np.diag(self._between(kinetic)))
        return float(moved * self.probabilities[0] / self.eigenvalues[0]) + self.expectation(self.link.potential)

    def gap(self, operators: Sequence[Local]) -> float:
        """Lowest level above the vacuum that one of the operators creates from it.

        Raises SpectrumError where none of the resolved levels has a matrix element with the vacuum.
        """
        vacuum = self.vectors[:, :1]
        observer = Observer(self.basis, vacuum, np.ones(1))
        created = np.zeros(len(self.energies), dtype=bool)
        for f in operators:
            made = observer.operator(f) @ vacuum
            elements = np.abs(self.vectors.conj().T @ made)[:, 0]
            least = max(ZERO_ELEMENT * np.linalg.norm(elements[1:]), 64 * ROUNDING * np.linalg.norm(made))
            created |= elements[: len(created)] > least
        levels = np.flatnonzero(created[1:]) + 1
        if not len(levels):
            raise SpectrumError("the operators create no state above the vacuum that this spacing resolves")
        return float(self.energies[levels[0]] - self.energies[0])

    # --- winding --------------------------------------------------------------------------------------------
    def average_phase(self) -> float:
        """Z(flux) / Z(0): the average of exp(i A int q') in the ensemble without flux."""
        if self.link.problem.flux == 0 or self.link.problem.period is None:
            return 1.0
        without = transfer(replace(self.link.problem, flux=0.0), self.spacing, self.sites)
        return float(np.exp(self.log_partition - without.log_partition))

    def winding_second_moment(self) -> float:
        """<Q^2> of the winding number, -Z''(theta)/Z(theta) with theta = flux times period, in closed form.

        Z'' = N Tr(T^{N-1} T'') + N sum_k Tr(T^k T' T^{N-2-k} T'), evaluated between eigenvectors. Absolute precision
        is that of its terms: <Q^2> below 1e-12 is rounding. Raises SpectrumError on the line.
        """
        if self.link.problem.period is None:
            raise SpectrumError("a path on the line has no winding number")
        speed = self.spacing * self.basis.momenta / self.link.problem.mass
        first, second = self._between(speed), self._between(speed**2 - self.spacing / self.link.problem.mass)
        r = self._ratios
        one = np.sum(r ** (self.sites - 1) * np.real(np.diag(second)))
        powers = r[:, None] ** np.arange(self.sites - 1)[None, :]
        two = np.sum(np.abs(first) ** 2 * (powers @ powers[:, ::-1].T)) / self.eigenvalues[0]
        curvature = self.sites * (one + two) * self.probabilities[0] / self.eigenvalues[0]
        return float(-curvature / self.link.problem.period**2)

    def _between(self, weight: Floats) -> Numbers:
        """T with each momentum weighted, between the eigenvectors, (M, M), in the units of `eigenvalues`."""
        outer = self.link.half(self.frame) @ self.vectors
        return np.asarray(outer.conj().T @ (self.link.kinetic(self.frame, weight) @ outer))


# --- solving ----------------------------------------------------------------------------------------------------
def transfer(problem: OnePath, spacing: float, sites: int) -> Transfer:
    """Solve the transfer matrix of one path.

    Parameters
    ----------
    problem
        One degree of freedom on the line or on a circle.
    spacing
        Of the lattice, in units of the notation.
    sites
        Number N of periodic sites, at least 1; beta = N times the spacing.

    Raises
    ------
    SpectrumError
        The potential does not confine (the trace grows with the box), is not a number where the path goes, or so
        rough that no basis of moderate size converges.
    """
    if not (spacing > 0 and np.isfinite(spacing)) or sites < 1:
        raise SpectrumError(f"a lattice needs a positive spacing and at least one site, got {spacing} and {sites}")
    start = _on_the_line if problem.period is None else _on_the_circle
    link, frame = start(problem, spacing, sites)
    if frame.points > MOST_POINTS:
        raise SpectrumError(
            f"the transfer matrix at spacing {spacing:g} needs {frame.points} points, more than {MOST_POINTS}: "
            "the temperature is too high, or the potential too wide"
        )
    found = fit(frame, link.solve, link.carried)
    settled = None if found.tails.fast > TAIL else _settled(link, found)
    if settled is None:
        link = RoughLink(problem, spacing, sites, link.bottom)
        frame = found.frame.finer(max(1.0, MOST_ROUGH / found.frame.points))
        found = Fit(frame, *link.solve(frame), found.tails)
        settled = found, link.change(found, frame.smaller().finer(0.7))
    found, change = settled
    return _reported(link, found, *change)


def _on_the_line(problem: OnePath, spacing: float, sites: int) -> tuple[Link, Frame]:
    landscape = survey(problem)
    if landscape.level:
        raise SpectrumError(
            f"the potential does not confine (V = {landscape.threshold:.6g} far away): "
            "the trace over periodic paths grows with the size of the box"
        )
    energy, above = landscape.energy_of(LEVELS + 0.5), THERMAL_RESIDUE / (spacing * sites)
    landscape = landscape.refined(energy + above)
    frame = line_frame(landscape, landscape.energy_of(LEVELS + 0.5, energy) + above)
    return Link(problem, spacing, sites, landscape.bottom), frame


def _on_the_circle(problem: OnePath, spacing: float, sites: int) -> tuple[Link, Frame]:
    v, number, period = around(problem)
    free = ((LEVELS + 1.5) * np.pi / period) ** 2 / (2 * problem.mass)
    energy = energy_below(number, LEVELS + 1.5, float(v.min()), free) + THERMAL_RESIDUE / (spacing * sites)
    return Link(problem, spacing, sites, float(v.min())), circle_frame(problem, energy)


@dataclass(frozen=True)
class Link:
    """T exp(a bottom) in a frame, exp(-aV/2) diagonal on the grid."""

    problem: OnePath
    spacing: float
    sites: int
    bottom: float

    def half(self, frame: Frame) -> Diagonal | Numbers:
        return Diagonal(self.root(frame.basis.grid))

    def root(self, q: Floats) -> Floats:
        """exp(-a (V - bottom)/2)."""
        return np.exp(-self.spacing * (self.problem.values(q) - self.bottom) / 2)

    def kinetic(self, frame: Frame, weight: Floats | float = 1.0) -> Numbers:
        """exp(-a p^2/2m), each momentum weighted."""
        basis = frame.basis
        return basis.operator(weight * np.exp(-self.spacing * basis.momenta**2 / (2 * self.problem.mass)))

    def potential(self, q: Floats) -> Floats:
        """V, cut off where exp(-aV) is zero in any case (poles, overflow)."""
        return np.minimum(self.problem.values(q), self.bottom + 800.0 / self.spacing)

    def matrix(self, frame: Frame) -> Numbers:
        half = self.half(frame)
        return np.asarray(half @ np.asarray(half @ self.kinetic(frame)).conj().T)

    def solve(self, frame: Frame) -> tuple[Floats, Numbers]:
        """Eigenvalues, descending, and eigenvectors."""
        values, vectors = diagonalise(self.matrix(frame), frame.mirrored)
        return np.maximum(values[::-1], 0.0), vectors[:, ::-1]

    def carried(self, values: Floats) -> int:
        """How many eigenvectors matter: those that carry the trace, and a few levels where they are resolved."""
        share = values / values[0]
        weight = self.sites * np.log(np.maximum(share, 1e-300))
        return int(np.count_nonzero((share > CLEAR) & ((weight > -THERMAL_RESIDUE) | (np.arange(len(share)) < LEVELS))))

    def change(self, found: Fit, other: Frame) -> tuple[float, Floats]:
        """Of ln Z, and of the resolved ln lambda_n, towards another frame."""
        values = np.maximum(eigenvalues(self.matrix(other), other.mirrored)[::-1], 0.0)
        size = min(len(values), int(np.count_nonzero(found.values > RESOLVED * found.values[0])))
        mine, others = found.values[:size], np.maximum(values[:size], 1e-300)
        return abs(self._log_trace(found.values) - self._log_trace(values)), np.abs(np.log(mine / others))

    def _log_trace(self, values: Floats) -> float:
        return float(self.sites * np.log(values[0]) + np.log(np.sum((values / values[0]) ** self.sites)))


class RoughLink(Link):
    """The same with the integrals over exp(-aV/2) done exactly, for a potential with kinks or steps."""

    def half(self, frame: Frame) -> Diagonal | Numbers:
        uniform = np.full(len(frame.basis.grid), 1 / len(frame.basis.grid))
        return integrated(self.root, frame.basis, uniform)


def _settled(link: Link, found: Fit) -> tuple[Fit, tuple[float, Floats]] | None:
    """Enlarge until ln Z and the vacuum agree with those of a smaller basis; None where they approach too slowly."""
    previous = np.inf
    while True:
        trace, logs = change = link.change(found, found.frame.smaller())
        worst = max(trace / (1 + 40 * link.sites * ROUNDING / AGREEMENT), float(logs[0]))
        if worst <= AGREEMENT:
            return found, change
        larger = found.frame.enlarged(Tails(1e-6, 1e-6, 1e-6))
        if worst > STALLED * previous or larger.points > MOST_POINTS:
            return None
        previous, found = worst, Fit(larger, *link.solve(larger), found.tails)


def _reported(link: Link, found: Fit, trace: float, logs: Floats) -> Transfer:
    if not logs[0] <= TOLERATED:
        raise SpectrumError(
            f"the transfer matrix does not settle: {len(found.values)} points still change it by {logs[0]:.2g}; "
            "the potential is too rough, or singular"
        )
    rounding = 4 * ROUNDING * found.values[0] / found.values[: len(logs)]
    return Transfer(
        link=link,
        frame=found.frame,
        eigenvalues=found.values,
        vectors=found.vectors,
        log_partition_error=trace + 4 * ROUNDING * link.sites,
        error=(logs + rounding) / link.spacing + ROUNDING * abs(link.bottom),
    )
