"""Levels in the continuum: bases fitted to the problem, enlarged until the levels asked for stand still.

The box ends where the highest level asked for has fallen by exp(-20) (its energy then feels the end by exp(-40)), and
the step is such that the same holds for its momenta. Whether that is so is read off the wave functions; then the
levels are computed once more in a smaller box with a longer step, and the change is their error.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Numbers, diagonalise, eigenvalues
from quarterturn.imaginary.fitting import (
    MOST_POINTS,
    STALLED,
    TAIL,
    Fit,
    Frame,
    LineFrame,
    Tails,
    around,
    circle_frame,
    fit,
    line_frame,
)
from quarterturn.imaginary.landscape import Landscape, energy_below, survey
from quarterturn.imaginary.observables import integrated
from quarterturn.imaginary.problem import OnePath
from quarterturn.imaginary.spectrum import Spectrum

Floats = NDArray[np.float64]
AGREEMENT = 3e-13  # change between two bases, relative to the spread of the levels, that counts as none
TOLERATED = 1e-3  # the largest error that is reported as one; beyond it the solution is refused
CONVERGED = 1e-9  # the same below which a level may enter sums
ROUNDING = 2.3e-16
CEILING = 50.0  # of the largest kinetic energy, above which a potential is cut off
MOST_ROUGH = 420  # points for potentials with kinks or steps


def levels(problem: OnePath, count: int) -> Spectrum:
    """The lowest `count` levels in the continuum.

    Parameters
    ----------
    problem
        One degree of freedom on the line or on a circle.
    count
        Number of levels, at least 1.

    Returns
    -------
    Spectrum
        Energies, shape (count,), ascending, each with an error estimate: its change between two bases and the rounding
        of the largest matrix element.

    Raises
    ------
    SpectrumError
        The potential falls without limit, is not a number where wave functions reach, binds fewer levels, or is so
        rough or wide that no basis of moderate size converges.
    """
    if count < 1:
        raise SpectrumError(f"at least one level must be asked for, not {count}")
    if problem.period is not None:
        return _on_the_circle(problem, count)
    return _on_the_line(problem, count)


# --- the line ---------------------------------------------------------------------------------------------------
def _on_the_line(problem: OnePath, count: int) -> Spectrum:
    landscape = survey(problem)
    energy = _highest(landscape, count, None)
    landscape = landscape.refined(energy)
    frame = line_frame(landscape, _highest(landscape, count, energy))
    hamiltonian = _Hamiltonian(problem, landscape.bottom)
    found = fit(_large_enough(frame, count), hamiltonian.solve, lambda _: count)
    if found.values[count - 1] + landscape.bottom >= landscape.threshold:
        raise _too_few(found, landscape, count)
    threshold = landscape.threshold if landscape.level else np.inf
    return _spectrum(hamiltonian, found, count, threshold, landscape.number)


def _large_enough(frame: Frame, count: int) -> Frame:
    if (points := max(frame.points, math.ceil(1.15 * count) + 12)) > MOST_POINTS:
        span = f" between q = {frame.low:.4g} and {frame.high:.4g}" if isinstance(frame, LineFrame) else ""
        raise SpectrumError(f"the levels asked for need {points} points{span}, more than {MOST_POINTS}")
    return frame.finer(points / frame.points)


def _highest(landscape: Landscape, count: int, guess: float | None) -> float:
    """An energy above level `count`, or one close to where the continuum begins."""
    energy = landscape.energy_of(count + 0.5, guess)
    return energy if energy < landscape.threshold else landscape.threshold - 0.1 * (energy - landscape.bottom)


def _too_few(found: Fit, landscape: Landscape, count: int) -> SpectrumError:
    frame = found.frame
    assert isinstance(frame, LineFrame)
    bound = int(np.count_nonzero(found.values + landscape.bottom < landscape.threshold))
    resolution = (np.pi / (frame.high - frame.low)) ** 2 / (2 * landscape.problem.mass)
    many = {0: "no level is bound", 1: "one level is bound"}.get(bound, f"{bound} levels are bound")
    return SpectrumError(
        f"{many}, {count} were asked for: above V = {landscape.threshold + 0.0:.6g} is the continuum "
        f"(a level less than about {resolution:.1g} below it would not be seen)"
    )


# --- the circle -------------------------------------------------------------------------------------------------
def _on_the_circle(problem: OnePath, count: int) -> Spectrum:
    v, number, period = around(problem)
    free = ((count + 1.5) * np.pi / period) ** 2 / (2 * problem.mass)
    energy = energy_below(number, count + 1.5, float(v.min()), free)
    hamiltonian = _Hamiltonian(problem, float(v.min()))
    found = fit(_large_enough(circle_frame(problem, energy), count), hamiltonian.solve, lambda _: count)
    return _spectrum(hamiltonian, found, count, np.inf, number)


# --- both -------------------------------------------------------------------------------------------------------
@dataclass(frozen=True)
class _Hamiltonian:
    """H - bottom in a frame, the potential diagonal on the grid."""

    problem: OnePath
    bottom: float

    def matrix(self, frame: Frame) -> Numbers:
        basis = frame.basis
        matrix = basis.operator(basis.momenta**2 / (2 * self.problem.mass))
        return self._with_potential(matrix, frame)

    def _with_potential(self, matrix: Numbers, frame: Frame) -> Numbers:
        matrix[np.diag_indices(len(matrix))] += self.potential(frame, frame.basis.grid)
        return matrix

    def potential(self, frame: Frame, q: Floats) -> Floats:
        """V - bottom, cut off far above every kinetic energy of the basis (poles, overflow)."""
        ceiling = CEILING * np.max(frame.basis.momenta**2) / (2 * self.problem.mass)
        return np.minimum(self.problem.values(q) - self.bottom, ceiling)

    def solve(self, frame: Frame) -> tuple[Floats, Numbers]:
        return diagonalise(self.matrix(frame), frame.mirrored)

    def rounding(self, frame: Frame) -> float:
        """Of one eigenvalue: the precision times the largest matrix element, and what it does to the grid points."""
        basis = frame.basis
        v = self.potential(frame, basis.grid)
        largest = np.max(basis.momenta**2) / (2 * self.problem.mass) + np.max(v) + abs(self.bottom)
        slope = np.median(np.abs(np.diff(v))) / basis.step
        return float(ROUNDING * (largest + slope * np.max(np.abs(basis.grid))))


class _RoughHamiltonian(_Hamiltonian):
    """The same with integrals over the potential done exactly, for one with kinks or steps."""

    def _with_potential(self, matrix: Numbers, frame: Frame) -> Numbers:
        uniform = np.full(len(matrix), 1 / len(matrix))
        return np.asarray(matrix + integrated(lambda q: self.potential(frame, q), frame.basis, uniform))


def _spectrum(
    hamiltonian: _Hamiltonian, found: Fit, count: int, threshold: float, number: Callable[[float], float]
) -> Spectrum:
    """Test a fit against a second basis, enlarge it while they differ, and report it with the difference."""
    problem, bottom = hamiltonian.problem, hamiltonian.bottom
    settled = None if found.tails.fast > TAIL else _settled(hamiltonian, found, count)
    if settled is None:
        hamiltonian, found, change = _integrated(problem, bottom, found.frame)
    else:
        found, change = settled
    rounding = hamiltonian.rounding(found.frame)
    errors = change + rounding
    height = found.values[count - 1]
    if not np.all(errors[:count] <= TOLERATED * height + 10 * rounding):
        raise SpectrumError(
            f"the levels do not settle: {len(found.values)} points still change them by {np.max(change[:count]):.2g}; "
            "the potential is too rough, or singular"
        )
    converged = errors <= CONVERGED * (found.values[: len(errors)] + height)

    def refined(kinetic: float) -> Spectrum:
        ratio = np.sqrt(2 * problem.mass * kinetic) / np.max(np.abs(found.frame.basis.momenta))
        frame = found.frame.finer(max(1.0, 1.02 * float(ratio)))
        if frame.points > MOST_POINTS:
            raise SpectrumError(f"it needs {frame.points} points, more than {MOST_POINTS}")
        values, vectors = hamiltonian.solve(frame)
        return replace(spectrum, basis=frame.basis, values=values + bottom, vectors=vectors)

    spectrum = Spectrum(
        energies=found.values[:count] + bottom,
        errors=errors[:count],
        basis=found.frame.basis,
        mass=problem.mass,
        values=found.values + bottom,
        vectors=found.vectors,
        reliable=max(count, len(converged) if converged.all() else int(np.argmin(converged))),
        threshold=threshold,
        facts=_facts(found, hamiltonian),
        extend=lambda height: levels(problem, math.ceil(number(found.values[0] + bottom + height)) + 2),
        refine=refined,
    )
    return spectrum


def _settled(hamiltonian: _Hamiltonian, found: Fit, count: int) -> tuple[Fit, Floats] | None:
    """Enlarge until the first `count` levels agree with those of a smaller basis; and the change of all of them.

    None where the change falls too slowly to say much about the error.
    """
    previous = np.inf
    while True:
        change = _change(hamiltonian, found, found.frame.smaller())
        worst = float(np.max(change[:count]))
        if worst <= AGREEMENT * found.values[count - 1] + 2 * hamiltonian.rounding(found.frame):
            return found, change
        larger = found.frame.enlarged(Tails(1e-6, 1e-6, 1e-6))
        if worst > STALLED * previous or larger.points > MOST_POINTS:
            return None
        previous, found = worst, Fit(larger, *hamiltonian.solve(larger), found.tails)


def _integrated(problem: OnePath, bottom: float, frame: Frame) -> tuple[_Hamiltonian, Fit, Floats]:
    """With all integrals over the potential, in many functions; and the change from two thirds as many."""
    hamiltonian = _RoughHamiltonian(problem, bottom)
    frame = frame.finer(max(1.0, MOST_ROUGH / frame.points))
    values, vectors = hamiltonian.solve(frame)
    found = Fit(frame, values, vectors, frame.tails(vectors[:, :1]))
    return hamiltonian, found, _change(hamiltonian, found, frame.smaller().finer(0.7))


def _change(hamiltonian: _Hamiltonian, found: Fit, other: Frame) -> Floats:
    values = eigenvalues(hamiltonian.matrix(other), other.mirrored)
    size = min(len(values), len(found.values))
    return np.asarray(np.abs(values[:size] - found.values[:size]))


def _facts(found: Fit, hamiltonian: _Hamiltonian) -> dict[str, str]:
    frame = found.frame
    if isinstance(frame, LineFrame):
        basis = f"{len(found.values)} sine functions"
        where = ("box", f"q = {frame.low:.4g} … {frame.high:.4g}")
    else:
        basis = f"{len(found.values)} plane waves"
        where = ("circle", f"circumference {hamiltonian.problem.period:.6g}")
    parity = ", split by parity" if frame.mirrored else ""
    kinks = ", kinks of the potential integrated" if isinstance(hamiltonian, _RoughHamiltonian) else ""
    return {"basis": basis + parity + kinks, where[0]: where[1]}
