"""Levels in the continuum: a sinc basis on the line, plane waves on the circle, enlarged until nothing changes.

On the line the kinetic energy of the sinc functions of an equidistant grid is known in closed form (Colbert and Miller,
J. Chem. Phys. 96 (1992) 1982) and the potential is diagonal; for smooth potentials the error falls exponentially with
the number of points. Even potentials are split by parity, so that a tunnelling splitting is the difference of two independent
eigenvalues. On the circle H = (p - A)^2/2m + V in plane waves. The error of a level is its change between two
bases, and never less than the rounding of the largest matrix element.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eigh

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.problem import OnePath
from quarterturn.imaginary.region import DECAY, Well, end_of_decay, extent, find_well

Floats = NDArray[np.float64]
MOST_POINTS = 3000
AGREEMENT = 1e-12  # relative change between two bases at which a level counts as converged
ROUNDING = 4e-16
KEPT = 24  # levels beyond those asked for that are kept for thermal sums, at least
THERMAL_RESIDUE = 1e-10  # weight beyond the last kept level at which a thermal sum is refused


@dataclass(frozen=True, eq=False)
class Spectrum:
    """Levels with errors, wave functions on a grid, and what follows from them. Energies in units of the notation."""

    energies: Floats  # (count,) as asked for, ascending
    errors: Floats  # (count,)
    grid: Floats  # (M,)
    weights: Floats  # (M,) of the quadrature on the grid
    states: NDArray  # (M, kept), normalised: sum weights |psi|^2 = 1; complex on a circle with flux
    kept: Floats  # (kept,) all converged levels, the first of which are `energies`
    facts: dict[str, str] = field(default_factory=dict)
    complete: bool = True  # whether higher levels exist only above `kept` (False: a continuum follows)

    def matrix(self, f: Callable[[Floats], Floats], count: int | None = None) -> NDArray:
        """<m|f(q)|n> between the kept levels, (count, count)."""
        states = self.states[:, :count]
        values = np.asarray(f(self.grid)) * self.weights
        return np.asarray(states.conj().T @ (values[:, None] * states))

    def matrix_element(self, f: Callable[[Floats], Floats], m: int, n: int) -> complex:
        """<m|f(q)|n>."""
        values = np.asarray(f(self.grid)) * self.weights
        element = np.sum(self.states[:, m].conj() * values * self.states[:, n])
        return complex(element) if np.iscomplexobj(self.states) else float(element)

    def expectation(self, f: Callable[[Floats], Floats], beta: float | None = None) -> float:
        """<f(q)> in the vacuum, or at inverse temperature beta. Raises SpectrumError as `probabilities`."""
        p = self.probabilities(beta)
        density = (np.abs(self.states[:, : len(p)]) ** 2) @ p
        return float(np.sum(np.asarray(f(self.grid)) * self.weights * density))

    def correlator(
        self, f: Callable[[Floats], Floats], g: Callable[[Floats], Floats], t: Floats, beta: float | None = None
    ) -> Floats:
        """Euclidean time-ordered <f(t) g(0)>, vacuum or thermal, (T,); real for real f, g after folding t and -t."""
        p = self.probabilities(beta)
        a, b = self.matrix(f), self.matrix(g)
        gaps = self.kept[None, :] - self.kept[: len(p), None]
        product = a[: len(p)] * b.T[: len(p)]
        times = np.abs(np.atleast_1d(np.asarray(t, dtype=np.float64)))
        if beta is not None and (times > beta).any():
            raise SpectrumError(f"a time beyond beta = {beta:g}")
        if beta is None:
            decays = np.exp(-gaps[None] * times[:, None, None])
            return np.real(np.einsum("tmn,mn->t", decays, product * p[:, None]))
        log_p = -beta * (self.kept - self.kept[0])
        scale = np.sum(np.exp(log_p))
        exponent = log_p[None, :, None] - (self.kept[None, :] - self.kept[:, None])[None] * times[:, None, None]
        return np.real(np.einsum("tmn,mn->t", np.exp(exponent), a * b.T)) / scale

    # --- thermal sums ---------------------------------------------------------------------------------------
    def probabilities(self, beta: float | None) -> Floats:
        """Boltzmann weights of the kept levels; the vacuum alone for beta None.

        Raises SpectrumError where the levels kept do not suffice for so high a temperature.
        """
        if beta is None:
            return np.ones(1)
        if not beta > 0:
            raise SpectrumError(f"beta must be positive, got {beta}")
        p = np.exp(-beta * (self.kept - self.kept[0]))
        if p[-1] > THERMAL_RESIDUE * p.sum():
            limit = -np.log(THERMAL_RESIDUE) / (self.kept[-1] - self.kept[0])
            raise SpectrumError(
                f"beta = {beta:g} is too high a temperature for the {len(p)} levels found: "
                f"they suffice down to beta = {limit:.3g}"
            )
        return np.asarray(p / p.sum())

    def partition(self, beta: float) -> float:
        """Z = sum exp(-beta E_n)."""
        self.probabilities(beta)
        return float(np.sum(np.exp(-beta * self.kept)))

    def free_energy(self, beta: float) -> float:
        """-ln Z / beta."""
        self.probabilities(beta)
        return float(self.kept[0] - np.log(np.sum(np.exp(-beta * (self.kept - self.kept[0])))) / beta)

    def energy(self, beta: float) -> float:
        """<H> at inverse temperature beta."""
        return float(self.probabilities(beta) @ self.kept)

    def heat_capacity(self, beta: float) -> float:
        """beta^2 (<H^2> - <H>^2)."""
        p = self.probabilities(beta)
        mean = p @ self.kept
        return float(beta**2 * (p @ (self.kept - mean) ** 2))


def levels(problem: OnePath, count: int) -> Spectrum:
    """The lowest `count` levels in the continuum, with error estimates.

    Raises SpectrumError where fewer are bound, the potential confines nothing, or no basis of moderate size converges.
    """
    if count < 1:
        raise SpectrumError(f"at least one level, not {count}")
    if problem.period is not None:
        return _on_the_circle(problem, count)
    return _on_the_line(problem, count)


# --- the line ---------------------------------------------------------------------------------------------------
def _on_the_line(problem: OnePath, count: int) -> Spectrum:
    well = find_well(problem)
    wanted = count + KEPT
    confined = not np.isfinite(well.threshold)
    top = _energy_of_level(problem, well, wanted) if confined else well.threshold
    if not confined:
        return _bound_states(problem, well, count)
    low, high = extent(problem, well, top)
    points = _first_points(problem, well, top, low, high)
    previous: Floats | None = None
    for _ in range(12):
        values, grid, states = _solve(problem, low, high, points, wanted)
        change = np.full(wanted, np.inf) if previous is None else np.abs(values - previous)
        scale = np.maximum(np.abs(values), values[-1] - values[0])
        if previous is not None and np.all(change[:count] <= AGREEMENT * scale[:count]):
            return _spectrum(problem, well, count, values, change, grid, states, "sinc functions", True)
        previous = values
        wider = 0.03 * (high - low)
        low, high, points = low - wider, high + wider, int(points * 1.3) + 2
        if points > MOST_POINTS:
            break
    raise SpectrumError(f"the levels did not converge with {points} points: the potential is too rough or singular")


def _bound_states(problem: OnePath, well: Well, count: int) -> Spectrum:
    """Levels below a continuum: boxes grow until the tail of the highest bound state fits in."""
    reach, density = 16 * well.width, 1.5
    previous: Floats | None = None
    for _ in range(24):
        low, high = well.centre - reach, well.centre + reach
        low, high = _trimmed(problem, well, low, high)
        top = well.threshold + well.energy_scale(problem.mass)
        points = int(density * _first_points(problem, well, top, low, high))
        if points > MOST_POINTS:
            break
        values, grid, states = _solve(problem, low, high, points, min(points - 2, count + KEPT))
        bound = values[values < well.threshold - 1e-9 * abs(well.threshold - well.bottom)]
        same = previous is not None and len(previous) == len(bound)
        if same and np.all(np.abs(bound - previous) <= AGREEMENT * (well.threshold - well.bottom)):
            if len(bound) < count:
                raise SpectrumError(
                    f"{len(bound)} levels are bound, {count} were asked for: "
                    f"above V = {well.threshold:.6g} is the continuum"
                )
            change = np.abs(bound - previous)
            return _spectrum(
                problem, well, count, bound, change, grid, states[:, : len(bound)], "sinc functions", False
            )
        previous, reach, density = bound, reach * 1.3, density * 1.12
    if previous is not None and len(previous) == 0:
        raise SpectrumError(f"no level is bound below V = {well.threshold:.6g}")
    raise SpectrumError("a level lies too close to the continuum to be told from it")


def _trimmed(problem: OnePath, well: Well, low: float, high: float) -> tuple[float, float]:
    """Cut off what lies behind a steep wall, where the decay is complete."""
    ends = []
    for side, end in ((-1.0, low), (1.0, high)):
        try:
            wall = end_of_decay(problem, well, well.threshold, side, DECAY)
        except SpectrumError:
            wall = end
        ends.append(max(end, wall) if side < 0 else min(end, wall))
    return ends[0], ends[1]


def _energy_of_level(problem: OnePath, well: Well, number: int) -> float:
    """Energy below which about `number` levels lie, by counting cells of phase space."""
    energy = well.bottom + well.energy_scale(problem.mass)
    for _ in range(400):
        low, high = extent(problem, well, energy, 3.0)
        q = np.linspace(low, high, 2000)
        momentum = np.sqrt(2 * problem.mass * np.clip(energy - problem.values_or_wall(q), 0.0, None))
        if np.sum(momentum) * (q[1] - q[0]) / np.pi > number + 1:
            return float(energy)
        energy = well.bottom + 1.15 * (energy - well.bottom)
    raise SpectrumError("the potential is too flat to count its levels")


def _first_points(problem: OnePath, well: Well, top: float, low: float, high: float) -> int:
    """Points for momenta half as large again as the classical ones, and no fewer than sixty."""
    momentum = np.sqrt(2 * problem.mass * max(top - well.bottom, well.energy_scale(problem.mass)))
    return int(max(60, 1.7 * momentum * (high - low) / np.pi))


def _solve(problem: OnePath, low: float, high: float, points: int, count: int) -> tuple[Floats, Floats, Floats]:
    """Lowest levels in sinc functions on an equidistant grid; split by parity where the potential is even."""
    if problem.even:
        return _solve_even(problem, max(-low, high), points, count)
    q, h = np.linspace(low, high, points, retstep=True)
    hamiltonian = _kinetic(q, q, h, problem.mass)
    v = np.minimum(problem.values_or_wall(q), _wall(problem, h, q))
    hamiltonian[np.diag_indices(points)] += v
    values, states = eigh(hamiltonian, subset_by_index=(0, count - 1))
    return values, q, states / np.sqrt(h)


def _wall(problem: OnePath, h: float, q: Floats) -> float:
    """A height at which a potential may be cut off without effect: a thousand times the largest kinetic energy."""
    v = problem.values_or_wall(q)
    return float(np.min(v) + 1000 * (np.pi / h) ** 2 / (2 * problem.mass))


def _kinetic(left: Floats, right: Floats, h: float, mass: float) -> Floats:
    n = np.round((left[:, None] - right[None, :]) / h)
    with np.errstate(divide="ignore", invalid="ignore"):
        t = np.where(n == 0, np.pi**2 / 3, 2 * (-1.0) ** np.abs(n) / n**2)
    return np.asarray(t / (2 * mass * h**2))


def _solve_even(problem: OnePath, reach: float, points: int, count: int) -> tuple[Floats, Floats, Floats]:
    half = points // 2 + 1
    h = reach / half
    q = (np.arange(half) + 0.5) * h
    near, far = _kinetic(q, q, h, problem.mass), _kinetic(q, -q, h, problem.mass)
    v = np.minimum(problem.values_or_wall(q), _wall(problem, h, q))
    found = []
    for sign, share in ((1.0, (count + 1) // 2), (-1.0, count // 2)):
        values, states = eigh(near + sign * far + np.diag(v), subset_by_index=(0, max(share, 1) - 1))
        whole = np.concatenate([sign * states[::-1], states]) / np.sqrt(2 * h)
        found += [(value, whole[:, i]) for i, value in enumerate(values)]
    found.sort(key=lambda item: item[0])
    values = np.array([value for value, _ in found[:count]])
    return values, np.concatenate([-q[::-1], q]), np.stack([state for _, state in found[:count]], axis=1)


def _spectrum(
    problem: OnePath, well: Well, count: int, values: Floats, change: Floats, grid: Floats, states: Floats,
    basis: str, complete: bool,
) -> Spectrum:  # fmt: skip
    h = float(grid[1] - grid[0])
    top = (np.pi / h) ** 2 / (2 * problem.mass) + abs(well.bottom)
    good = change <= 1e-9 * np.maximum(np.abs(values), values[-1] - values[0] + 1e-300)
    kept = len(values) if good.all() else max(count, int(np.argmin(good)))
    facts = {
        "basis": f"{basis}, {len(grid)} points" + (", split by parity" if problem.even else ""),
        "box": f"{grid[0]:.4g} to {grid[-1]:.4g}",
    }
    errors = change[:count] + ROUNDING * top
    return Spectrum(
        values[:count], errors, grid, np.full(len(grid), h), states[:, :kept], values[:kept], facts, complete
    )


# --- the circle -------------------------------------------------------------------------------------------------
def _on_the_circle(problem: OnePath, count: int) -> Spectrum:
    wanted = count + KEPT
    size = 2 * wanted + 33
    previous: Floats | None = None
    while size <= MOST_POINTS:
        values, grid, states = _plane_waves(problem, size, wanted)
        if previous is not None:
            change = np.abs(values - previous)
            scale = np.maximum(np.abs(values), values[-1] - values[0])
            if np.all(change[:count] <= AGREEMENT * scale[:count]):
                h = float(grid[1] - grid[0])
                top = (np.pi / h) ** 2 / (2 * problem.mass)
                facts = {"basis": f"{size} plane waves", "circle": f"circumference {problem.period:.6g}"}
                errors = change[:count] + ROUNDING * top
                good = change <= 1e-9 * scale
                kept = wanted if good.all() else max(count, int(np.argmin(good)))
                weights = np.full(len(grid), h)
                return Spectrum(values[:count], errors, grid, weights, states[:, :kept], values[:kept], facts)
        previous, size = values, int(size * 1.4) | 1
    raise SpectrumError(f"the levels did not converge with {size} plane waves: the potential is too rough")


def _plane_waves(problem: OnePath, size: int, count: int) -> tuple[Floats, Floats, NDArray]:
    """Lowest levels in `size` (odd) plane waves; wave functions on 2 size points of the circle."""
    assert problem.period is not None
    half = size // 2
    points = 2 * size
    grid = np.arange(points) * problem.period / points
    fourier = np.fft.fft(problem.values(grid)) / points
    k = np.arange(-half, half + 1)
    # centred on the flux, so that the truncation treats both directions alike
    k = k + int(np.round(problem.flux * problem.period / (2 * np.pi)))
    momenta = 2 * np.pi * k / problem.period - problem.flux
    hamiltonian = fourier[(k[:, None] - k[None, :]) % points]
    hamiltonian = (hamiltonian + hamiltonian.conj().T) / 2
    if np.abs(hamiltonian.imag).max() <= 1e-15 * max(np.abs(hamiltonian).max(), 1e-300):
        hamiltonian = hamiltonian.real
    hamiltonian[np.diag_indices(size)] += momenta**2 / (2 * problem.mass)
    values, coefficients = eigh(hamiltonian, subset_by_index=(0, count - 1))
    waves = np.exp(2j * np.pi * np.outer(grid, k) / problem.period) / np.sqrt(problem.period)
    return values, grid, waves @ coefficients
