"""A periodic box and grid that hold the lower states of a system of one or two degrees of freedom.

The energy is that below which phase space has room for so many states; the box ends where waves of that energy have
decayed in every direction, and the grid holds their momenta (semiclassical estimates, whose adequacy is tested on the
waves themselves afterwards).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.propagation import Grid, Numbers, System

Floats = NDArray[np.float64]
ROOM = {1: 24.0, 2: 60.0}  # states
DECAY = 20.0  # exponent by which a wave has fallen at the end of the box
OVERSAMPLED = 1.8  # times the largest classical momentum
DIRECTIONS = 48
RADII = np.geomspace(1e-7, 1e7, 2200)
SCALES = np.geomspace(1e-4, 1e4, 33)  # half-widths of boxes in which the lowest point is sought
SAMPLES = {1: 2001, 2: 161}  # along each axis
MOST_POINTS = {1: 4096, 2: 512}  # along each axis
EDGE = 0.04  # of the box and of the momenta, where a wave that is held has nothing


def fitted_grid(system: System) -> Grid:
    """A grid for the lower states. Raises SpectrumError where the potential does not confine."""
    centre, bottom = _lowest(system)
    rise = 1e-9 * max(1.0, abs(bottom))
    while True:
        rise *= 2
        if rise > 1e12 * max(1.0, abs(bottom)):
            raise SpectrumError("no energy scale is found: the potential is too flat or too steep to propagate in")
        low, high = _extent(system, centre, bottom + rise)
        if _states(system, low, high, bottom + rise) >= ROOM[system.degrees]:
            break
    length = tuple(float(b - a) for a, b in zip(low, high, strict=True))
    fastest = [OVERSAMPLED * np.sqrt(2 * system.mass[i, i] * rise) for i in range(system.degrees)]
    points = tuple(max(16, int(np.ceil(size * p / np.pi))) for size, p in zip(length, fastest, strict=True))
    return checked(Grid(tuple(map(float, low)), length, points).finer(1.0))


def checked(grid: Grid) -> Grid:
    """The grid, if it is not too large."""
    limit = MOST_POINTS[len(grid.points)]
    if max(grid.points) > limit:
        raise SpectrumError(
            f"the waves need {' x '.join(map(str, grid.points))} points, more than {limit} along an axis: their "
            "wavelengths are too short for the region they fill"
        )
    return grid


def held(wave: Numbers, grid: Grid, periods: tuple[float | None, ...]) -> tuple[float, float]:
    """The share of a wave at the ends of the box (on the line), and at the fastest momenta; amplitudes, not squares."""
    density, spectrum = np.abs(wave), np.abs(np.fft.fftn(wave))
    ends = fastest = 0.0
    for axis, n in enumerate(grid.points):
        margin = max(1, int(EDGE * n))
        if periods[axis] is None:
            edge = np.take(density, [*range(margin), *range(n - margin, n)], axis=axis)
            ends = max(ends, float(edge.max() / density.max()))
        quick = np.take(spectrum, range(n // 2 - margin, n // 2 + margin + 1), axis=axis)
        fastest = max(fastest, float(quick.max() / spectrum.max()))
    return ends, fastest


def _value(system: System, *q: Floats) -> Floats:
    with np.errstate(all="ignore"):
        v = np.asarray(system.potential(*q), dtype=np.float64)
    return np.where(np.isnan(v), np.inf, v)


def _lowest(system: System) -> tuple[Floats, float]:
    """The lowest point that is found on boxes of all scales, sharpened."""
    best: tuple[float, tuple[float, ...]] = (np.inf, (0.0,) * system.degrees)
    for scale in SCALES:
        axes = [np.linspace(-1, 1, 41) * (scale if p is None else p / 2) for p in system.periods]
        mesh = np.meshgrid(*axes, indexing="ij")
        v = _value(system, *mesh)
        i = np.unravel_index(int(np.argmin(v)), v.shape)
        best = min(best, (float(v[i]), tuple(float(m[i]) for m in mesh)))
    if not np.isfinite(best[0]):
        raise SpectrumError("the potential is finite nowhere that was looked at")
    found = minimize(lambda q: float(_value(system, *map(np.asarray, q))), best[1], method="Nelder-Mead",
                     options={"xatol": 1e-10, "fatol": 1e-14})  # fmt: skip
    if found.fun < best[0]:
        best = (float(found.fun), tuple(map(float, found.x)))
    return np.array(best[1]), best[0]


def _rays(system: System) -> Floats:
    """Directions in the coordinates on the line, (K, d); zero along angles."""
    line = [p is None for p in system.periods]
    if sum(line) == 2:
        angles = 2 * np.pi * np.arange(DIRECTIONS) / DIRECTIONS
        return np.stack([np.cos(angles), np.sin(angles)], axis=1)
    rays = [sign * np.eye(system.degrees)[i] for i in range(system.degrees) if line[i] for sign in (-1, 1)]
    return np.array(rays).reshape(-1, system.degrees)


def _extent(system: System, centre: Floats, energy: float) -> tuple[Floats, Floats]:
    """The box outside which waves of this energy have fallen by exp(-DECAY)."""
    low, high = centre.copy(), centre.copy()
    starts = [centre]
    for i, p in enumerate(system.periods):
        if p is not None:
            low[i], high[i] = -p / 2, p / 2
            starts = [np.where(np.arange(system.degrees) == i, a, centre) for a in np.linspace(-p / 2, p / 2, 16)]
    for ray in _rays(system):
        inertia = float(ray @ system.mass @ ray)
        for start in starts:
            end = start + ray * _reach(system, start, ray, inertia, energy)
            low, high = np.minimum(low, end), np.maximum(high, end)
    return low, high


def _reach(system: System, start: Floats, ray: Floats, inertia: float, energy: float) -> float:
    q = start[:, None] + ray[:, None] * RADII[None, :]
    v = _value(system, *q)
    allowed = np.flatnonzero(v < energy)
    first = int(allowed[-1]) if allowed.size else 0
    rate = np.sqrt(2 * inertia * np.maximum(np.minimum(v[first:], 1e200) - energy, 0.0))
    exponent = np.cumsum((rate[1:] + rate[:-1]) / 2 * np.diff(RADII[first:]))
    if not (exponent.size and exponent[-1] >= DECAY):
        along = ", ".join(f"{x:.2g}" for x in ray)
        raise SpectrumError(
            f"the potential does not confine: waves of energy {energy:.4g} have no end in the direction ({along})"
        )
    return float(RADII[first + 1 + int(np.searchsorted(exponent, DECAY))])


def _states(system: System, low: Floats, high: Floats, energy: float) -> float:
    """Volume of phase space below an energy, in units of (2 pi)^d."""
    d = system.degrees
    axes = [np.linspace(a, b, SAMPLES[d]) for a, b in zip(low, high, strict=True)]
    kinetic = np.maximum(energy - _value(system, *np.meshgrid(*axes, indexing="ij")), 0.0)
    ball = 2 * np.sqrt(2 * kinetic) if d == 1 else 2 * np.pi * kinetic
    return float(np.mean(ball) * np.prod(high - low) * np.sqrt(np.linalg.det(system.mass)) / (2 * np.pi) ** d)
