"""Split-operator propagation in imaginary time, of one or two degrees of freedom, on a periodic grid.

exp(-eps (T + V)) is split symmetrically: Strang's second order, and the fourth order with positive coefficients that
needs the gradient of the potential (Suzuki, Phys. Lett. A 201 (1995) 425; Chin, Phys. Lett. A 226 (1997) 344, scheme
4A). Negative coefficients, which any fourth order without the gradient has, would run imaginary time backwards. The
kinetic part is exact in Fourier space. Time may be complex with a positive real part: a turned Euclidean time.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import fft

from quarterturn.errors import SpectrumError

Floats = NDArray[np.float64]
Numbers = NDArray[Any]  # float64, or complex128
OfPoints = Callable[..., Floats]  # of one array of positions for each degree of freedom
CEILING = 400.0  # of eps V, above which a factor exp(-eps V) is zero anyway


@dataclass(frozen=True, eq=False)
class System:
    """H = 1/2 (p - A) M^-1 (p - A) + V(q) for d = 1 or 2 degrees of freedom; hbar = 1."""

    mass: Floats  # (d, d), symmetric and positive
    potential: OfPoints
    gradient: Sequence[OfPoints]  # dV/dq_i
    periods: Sequence[float | None]  # of angles
    flux: Floats  # (d,) A

    @property
    def degrees(self) -> int:
        return len(self.mass)

    @cached_property
    def inverse_mass(self) -> Floats:
        return np.asarray(np.linalg.inv(self.mass))


@dataclass(frozen=True)
class Grid:
    """A periodic box: `points[i]` equidistant points from low[i] on, over length[i]."""

    low: tuple[float, ...]
    length: tuple[float, ...]
    points: tuple[int, ...]

    @property
    def steps(self) -> Floats:
        return np.array(self.length) / np.array(self.points)

    @property
    def cell(self) -> float:
        """Length or area of one cell."""
        return float(np.prod(self.steps))

    @cached_property
    def axes(self) -> tuple[Floats, ...]:
        return tuple(a + h * np.arange(n) for a, h, n in zip(self.low, self.steps, self.points, strict=True))

    @cached_property
    def positions(self) -> tuple[Floats, ...]:
        """One array over the whole grid for each degree of freedom."""
        return tuple(np.meshgrid(*self.axes, indexing="ij"))

    @cached_property
    def momenta(self) -> tuple[Floats, ...]:
        waves = [2 * np.pi * fft.fftfreq(n, h) for n, h in zip(self.points, self.steps, strict=True)]
        return tuple(np.meshgrid(*waves, indexing="ij"))

    def finer(self, factor: float) -> Grid:
        return Grid(self.low, self.length, tuple(fft.next_fast_len(int(np.ceil(n * factor))) for n in self.points))

    def wider(self, factor: float, periods: Sequence[float | None]) -> Grid:
        """Larger on the line; the steps stay as they are."""
        grow = [factor if p is None else 1.0 for p in periods]
        low = tuple(a - (g - 1) / 2 * size for a, g, size in zip(self.low, grow, self.length, strict=True))
        length = tuple(g * size for g, size in zip(grow, self.length, strict=True))
        points = tuple(fft.next_fast_len(int(np.ceil(n * g))) for n, g in zip(self.points, grow, strict=True))
        return Grid(low, length, points)

    def delta(self, place: Sequence[float]) -> Numbers:
        """The narrowest wave of this grid at a place: every momentum with equal weight, integral 1."""
        phase = sum(k * (a - x) for k, a, x in zip(self.momenta, self.low, place, strict=True))
        return np.asarray(fft.ifftn(np.exp(1j * np.asarray(phase))) / self.cell)

    def at(self, wave: Numbers, place: Sequence[float]) -> complex:
        """The value of a wave at any place, by its Fourier series."""
        phase = sum(k * (x - a) for k, a, x in zip(self.momenta, self.low, place, strict=True))
        return complex(np.sum(fft.fftn(wave) * np.exp(1j * np.asarray(phase))) / wave.size)


@dataclass(frozen=True)
class Scheme:
    """A symmetric splitting: stages of (share of eps for V, coefficient of eps^3 |grad V|^2, share of eps for T after).

    All shares are positive.
    """

    name: str
    order: int
    stages: tuple[tuple[float, float, float], ...]


STRANG = Scheme("second order (Strang)", 2, ((1 / 2, 0.0, 1.0), (1 / 2, 0.0, 0.0)))
CHIN_4A = Scheme(
    "fourth order (Suzuki-Chin 4A, positive coefficients)",
    4,
    ((1 / 6, 0.0, 1 / 2), (2 / 3, 1 / 72, 1 / 2), (1 / 6, 0.0, 0.0)),
)
SCHEMES = {"second": STRANG, "fourth": CHIN_4A}


@dataclass(frozen=True, eq=False)
class Propagator:
    """exp(-eps (H - reference)) as a product of factors, for one (perhaps complex) eps."""

    system: System
    grid: Grid
    scheme: Scheme
    eps: complex
    reference: float = 0.0

    @cached_property
    def _v(self) -> Floats:
        with np.errstate(all="ignore"):
            v = np.asarray(self.system.potential(*self.grid.positions), dtype=np.float64)
        if np.isnan(v).any() or np.isneginf(v).any():
            raise SpectrumError("the potential is not a number, or minus infinity, at a point of the grid")
        return v - self.reference

    @cached_property
    def _slope(self) -> Floats:
        """grad V . M^-1 grad V = [V, [T, V]]."""
        with np.errstate(all="ignore"):
            g = [np.broadcast_to(np.asarray(d(*self.grid.positions)), self._v.shape) for d in self.system.gradient]
            inverse = self.system.inverse_mass
            total = sum(inverse[i, j] * g[i] * g[j] for i in range(len(g)) for j in range(len(g)))
        return np.asarray(total)

    @cached_property
    def kinetic(self) -> Floats:
        """1/2 (p - A) M^-1 (p - A) at the momenta of the grid."""
        p = [k - a for k, a in zip(self.grid.momenta, self.system.flux, strict=True)]
        inverse = self.system.inverse_mass
        return np.asarray(sum(inverse[i, j] * p[i] * p[j] for i in range(len(p)) for j in range(len(p))) / 2)

    @cached_property
    def _factors(self) -> list[tuple[Numbers, Numbers | None]]:
        return [(self._local(v, c), self._free(t) if t else None) for v, c, t in self.scheme.stages]

    def _local(self, share: float, correction: float) -> Numbers:
        with np.errstate(all="ignore"):
            exponent = share * self.eps * self._v
            if correction:
                exponent = exponent + correction * self.eps**3 * self._slope
            beyond = ~(np.abs(exponent) < CEILING) & (np.real(exponent) > 0)
            return np.asarray(np.where(beyond, 0.0, np.exp(-np.where(beyond, 0.0, exponent))))

    def _free(self, share: float) -> Numbers:
        return np.asarray(np.exp(-share * self.eps * self.kinetic))

    def advance(self, wave: Numbers, steps: int) -> Numbers:
        """The wave after so many steps; neighbouring factors of V are taken together."""
        (first, _), (last, _) = self._factors[0], self._factors[-1]
        joint = first * last
        wave = wave * first
        for step in range(steps):
            for position, (local, free) in enumerate(self._factors):
                if position:
                    edge = position == len(self._factors) - 1
                    wave = wave * (joint if edge and step + 1 < steps else local)
                if free is not None:
                    wave = fft.ifftn(free * fft.fftn(wave))
        return wave

    def energy(self, wave: Numbers) -> float:
        """<H> of a wave."""
        norm = float(np.sum(np.abs(wave) ** 2))
        wave_p = fft.fftn(wave)
        kinetic = float(np.sum(self.kinetic * np.abs(wave_p) ** 2) / np.sum(np.abs(wave_p) ** 2))
        with np.errstate(invalid="ignore"):
            density = np.abs(wave) ** 2
            potential = float(np.sum(np.where(density > 0, self._v * density, 0.0)) / norm)
        return kinetic + potential + self.reference


@dataclass(frozen=True, eq=False)
class Evolved:
    """A wave after an imaginary time, from the finest of a ladder of steps; how the ladder converged."""

    grid: Grid
    wave: Numbers  # the state, not normalised; times exp(-time * reference)
    time: complex
    reference: float
    scheme: Scheme
    steps: tuple[int, ...]  # of each rung
    changes: tuple[float, ...]  # between neighbours, relative to the norm
    error: float  # of the finest, relative to the norm

    @property
    def order(self) -> float | None:
        """The measured order of convergence, from the last changes above rounding; None if there are none."""
        return measured_order(self.steps, self.changes)


def measured_order(steps: Sequence[int], changes: Sequence[float], noise: float = 1e-10) -> float | None:
    """log(change / next change) / log(2) of the last pair of changes above the noise, which rounding makes."""
    clean = [i for i in range(len(changes) - 1) if changes[i + 1] > noise and changes[i] < 1e-2]
    if not clean:
        return None
    i = clean[-1]
    return float(np.log(changes[i] / changes[i + 1]) / np.log(steps[i + 2] / steps[i + 1]))


def evolve(
    system: System,
    grid: Grid,
    wave: Numbers,
    time: complex,
    *,
    scheme: Scheme = CHIN_4A,
    reference: float = 0.0,
    tolerance: float = 1e-11,
    most_steps: int = 4096,
    first: int = 8,
) -> Evolved:
    """exp(-time (H - reference)) applied to a wave, with steps halved until nothing changes.

    Parameters
    ----------
    system, grid
        What propagates, and where; the grid is taken as sufficient.
    wave
        On the grid.
    time
        Imaginary time; complex for a turned one, with a real part that is not negative.
    tolerance
        Relative error of the result at which the ladder ends; it also ends at `most_steps`.

    Returns
    -------
    Evolved
        With the measured order of convergence; its error is the last change over 2^order - 1.
    """
    steps, waves, changes = first, [], []
    rungs: list[int] = []
    while True:
        waves.append(Propagator(system, grid, scheme, time / steps, reference).advance(wave, steps))
        rungs.append(steps)
        if len(waves) > 1:
            changes.append(float(np.linalg.norm(waves[-1] - waves[-2]) / np.linalg.norm(waves[-1])))
            error = changes[-1] / (2**scheme.order - 1)
            settled = error <= tolerance or (len(changes) > 1 and changes[-1] > changes[-2] and changes[-1] < 1e-9)
            if settled or 2 * steps > most_steps:
                return Evolved(grid, waves[-1], time, reference, scheme, tuple(rungs), tuple(changes), error + 1e-14)
        steps *= 2
