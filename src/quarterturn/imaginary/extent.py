"""How far wave functions of two or three degrees of freedom reach, and how fast their waves are.

The same semiclassical reckoning as for one path (cells of phase space below an energy; exponents of decay along each
coordinate, the others relaxed to where V is lowest), on a coarse grid whose box is moved until nothing changes. It
only chooses a basis, whose adequacy is tested afterwards.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.coupled import Coordinates, CoupledPaths
from quarterturn.imaginary.fitting import MARGIN, radius_of

Floats = NDArray[np.float64]
DECADES = 6
DECAY = 18.0  # exponent by which wave functions fall towards the ends of the box
SAMPLES = {2: 49, 3: 27}  # of each coordinate
BALL = {2: math.pi, 3: 4 * math.pi / 3}
ROUNDS = 60
INSTEAD = "sample it, or look for its saddles"


@dataclass(frozen=True)
class Extent:
    """One coordinate: its box (a circle has its circumference), and its fastest wave number."""

    low: float
    high: float
    fastest: float
    period: float | None

    def scaled(self, reach: float, density: float) -> Extent:
        """A wider or narrower box about the same middle, with faster or slower waves."""
        if self.period is not None:
            return Extent(self.low, self.high, self.fastest * density, self.period)
        middle, half = (self.low + self.high) / 2, (self.high - self.low) / 2 * reach
        return Extent(middle - half, middle + half, self.fastest * density, None)


@dataclass(frozen=True, eq=False)
class Region:
    """V on a coarse grid over a box."""

    coordinates: Coordinates
    ticks: tuple[Floats, ...]
    v: Floats

    @property
    def bottom(self) -> float:
        return float(self.v.min())

    def number(self, energy: float) -> float:
        """Cells of phase space below an energy: about as many levels."""
        size = len(self.ticks)
        cell = math.prod(float(t[1] - t[0]) for t in self.ticks) * float(np.sqrt(np.prod(self.coordinates.masses)))
        volume = np.sum((2 * np.maximum(energy - self.v, 0.0)) ** (size / 2)) * cell
        return float(BALL[size] * volume / (2 * math.pi) ** size)

    def energy_of(self, count: float) -> float:
        """Energy below which `count` cells of phase space lie."""
        lowest = np.sort(self.v, axis=None)[: 3**self.v.ndim]
        low, high = 0.0, float(lowest[-1] - lowest[0]) or 1.0
        while self.number(self.bottom + high) < count:
            low, high = high, 2 * high
        while high - low > 0.01 * high:
            middle = (low + high) / 2
            low, high = (middle, high) if self.number(self.bottom + middle) < count else (low, middle)
        return self.bottom + high

    def form(self, energy: float) -> Floats:
        """The inverse covariance of the lines over the classically allowed phase space, in the paths, (L, L)."""
        lines = self.coordinates.problem.lines
        weights = np.maximum(energy - self.v, 0.0).ravel()
        q = self.coordinates.paths(np.stack(np.meshgrid(*self.ticks, indexing="ij")).reshape(len(self.ticks), -1))[
            lines
        ]
        q = q - (q @ weights / weights.sum())[:, None]
        covariance = (q * weights) @ q.T / weights.sum()
        size = np.sqrt(np.outer(np.diag(covariance), np.diag(covariance)))
        return np.asarray(np.linalg.inv(np.where(np.abs(covariance) > 1e-6 * size, covariance, 0.0)))

    def along(self, i: int) -> Floats:
        """V along one coordinate, the others relaxed."""
        return np.asarray(self.v.min(axis=tuple(j for j in range(self.v.ndim) if j != i)))


def lowest(problem: CoupledPaths) -> tuple[Floats, Floats]:
    """Where V is lowest, (C,), and how far along each coordinate a wave packet reaches in V alone, (C,).

    Raises SpectrumError where V falls without limit or is lowest far away.
    """
    lines = problem.lines
    if not len(lines):
        return np.zeros(problem.size), np.zeros(problem.size)
    shells = np.concatenate([[0.0], np.logspace(-DECADES, DECADES, 12 * 2 * DECADES + 1)])
    turns = [np.array([0.0]) if p is None else np.arange(12) * (p / 12) for p in problem.periods]
    angles = np.stack([a.ravel() for a in np.meshgrid(*turns, indexing="ij")])  # (C, T)
    units = np.array([u for u in itertools.product((-1, 0, 1), repeat=len(lines)) if any(u)], dtype=float).T
    points = np.zeros((problem.size, units.shape[1], len(shells), angles.shape[1]))
    points += angles[:, None, None, :]
    points[lines] = (units / np.linalg.norm(units, axis=0))[:, :, None, None] * shells[:, None]
    v = problem.values(points).min(axis=-1)  # (directions, shells)
    if np.isneginf(v).any():
        where = shells[int(np.argwhere(np.isneginf(v))[0][1])]
        if where == 0.0:
            raise SpectrumError(
                "the potential is minus infinity at the origin, which is solved for one path only: "
                f"soften it there, or {INSTEAD}"
            )
    k = np.unravel_index(int(np.argmin(v)), v.shape)
    if k[1] == len(shells) - 1 and v[k] < v[:, 0].min():
        raise SpectrumError("the potential falls without limit, or is lowest far away: nothing is bound")
    flat = problem.values(points).reshape(-1)
    centre = points.reshape(problem.size, -1)[:, int(np.argmin(flat))]
    return centre, _reach(problem, centre, float(v[k]))


def _reach(problem: CoupledPaths, centre: Floats, bottom: float) -> Floats:
    sizes = np.logspace(-DECADES, DECADES, 24 * DECADES + 1)
    reach = np.full(problem.size, np.nan)
    inverse = np.diag(np.linalg.inv(problem.mass))
    for i in problem.lines:
        steps = np.zeros((problem.size, 2, len(sizes)))
        steps[i] = np.stack([sizes, -sizes])
        rise = np.max(problem.values(centre[:, None, None] + steps), axis=0) - bottom
        enough = np.flatnonzero(rise * sizes**2 >= inverse[i] / 2)
        reach[i] = sizes[enough[0]] if len(enough) else np.nan
    known = reach[problem.lines]
    if np.isnan(known).all():
        raise SpectrumError(f"the potential does not confine along any of the variables: {INSTEAD}")
    reach[problem.lines] = np.where(np.isnan(known), np.nanmean(known), known)
    return reach


def curvature(problem: CoupledPaths, centre: Floats, reach: Floats) -> Floats:
    """Second derivatives among the lines by differences over the reach of a wave packet, (L, L)."""
    lines = problem.lines
    steps = np.zeros((len(lines), problem.size))
    steps[np.arange(len(lines)), lines] = reach[lines] / 2
    shifts = [
        a * steps[i] + b * steps[j]
        for i in range(len(lines))
        for j in range(len(lines))
        for a in (1, -1)
        for b in (1, -1)
    ]
    v = problem.values((centre + np.array(shifts)).T).reshape(len(lines), len(lines), 4)
    second = (v[..., 0] - v[..., 1] - v[..., 2] + v[..., 3]) / 4
    second = second / np.outer(reach[lines] / 2, reach[lines] / 2)
    if not np.isfinite(second).all():
        return np.eye(len(lines))
    size = np.abs(second).max(initial=0.0)
    return np.asarray(np.where(np.abs(second) > 1e-10 * size, second, 0.0))


def settle(
    coordinates: Coordinates, centre: Floats, reach: Floats, count: float, above: float = 0.0
) -> tuple[Region, list[Extent]]:
    """The box of wave functions up to level `count`, and `above` more in energy. Raises SpectrumError without one."""
    back = np.linalg.inv(coordinates.matrix)
    middle, half = back @ centre, 4 * np.abs(back) @ np.nan_to_num(reach)
    periods = coordinates.problem.periods
    ends = [(-p / 2, p / 2) if p else (m - h, m + h) for p, m, h in zip(periods, middle, half, strict=True)]
    for _ in range(ROUNDS):
        region = _region(coordinates, ends)
        energy = region.energy_of(count) + above
        moved = [e if p else _ends(region, i, energy) for i, (e, p) in enumerate(zip(ends, periods, strict=True))]
        if all(
            abs(a - b) < 0.04 * (e[1] - e[0])
            for e, n in zip(ends, moved, strict=True)
            for a, b in zip(e, n, strict=True)
        ):
            return region, [_extent(region, i, energy, *e) for i, e in enumerate(moved)]
        ends = moved
    raise SpectrumError(
        f"the potential does not confine as many levels as {round(count)}, with all paths coupled: {INSTEAD}"
    )


def _region(coordinates: Coordinates, ends: Sequence[tuple[float, float]]) -> Region:
    points = SAMPLES[len(ends)]
    ticks: tuple[Floats, ...] = tuple(
        np.asarray(low + (high - low) / (points - (p is None)) * np.arange(points), dtype=np.float64)
        for (low, high), p in zip(ends, coordinates.problem.periods, strict=True)
    )
    v = coordinates.potential(np.stack(np.meshgrid(*ticks, indexing="ij")))
    if np.isneginf(v).any():
        raise SpectrumError(f"the potential is minus infinity where wave functions reach; {INSTEAD}")
    if not np.isfinite(v).any():
        raise SpectrumError("the potential is infinite everywhere")
    return Region(coordinates, ticks, v)


def _ends(region: Region, i: int, energy: float) -> tuple[float, float]:
    x, v = region.ticks[i], region.along(i)
    right = _end(x, v, region, i, energy)
    left = -_end(-x[::-1], v[::-1], region, i, energy)
    if abs(left + right) < 0.03 * (right - left):  # a box about the origin keeps reflections
        left, right = -max(-left, right), max(-left, right)
    return left, right


def _end(x: Floats, v: Floats, region: Region, i: int, energy: float) -> float:
    last = int(np.flatnonzero(v < energy)[-1])
    rate = np.sqrt(2 * region.coordinates.masses[i] * np.maximum(np.nan_to_num(v[last:], posinf=1e300) - energy, 0.0))
    exponent = np.concatenate([[0.0], np.cumsum((rate[1:] + rate[:-1]) / 2 * (x[1] - x[0]))])
    if exponent[-1] < 0.8 * DECAY:
        return float(x[-1] + 0.3 * (x[-1] - x[0]))
    return float(np.interp(DECAY, exponent, x[last:]))


def _extent(region: Region, i: int, energy: float, low: float, high: float) -> Extent:
    """The box and the fastest wave: that of a particle at the bottom, and its tail in momentum."""
    v, mass, step = region.along(i), float(region.coordinates.masses[i]), float(region.ticks[i][1] - region.ticks[i][0])

    def cells(e: float) -> float:
        return float(np.sum(np.sqrt(2 * mass * np.maximum(e - v, 0.0))) * step / np.pi)

    height = energy - region.bottom
    growth = math.log2(max(cells(region.bottom + 2 * height), 1e-9) / max(cells(energy), 1e-9))
    slow = (
        1.0
        if region.coordinates.problem.periods[i]
        else math.sin(math.pi / min(max(1 / max(growth - 0.5, 0.01), 2.0), 8.0))
    )
    radius = radius_of(DECAY / max(cells(energy), 0.3) / slow)
    return Extent(low, high, math.sqrt(2 * mass * height) * radius * MARGIN, region.coordinates.problem.periods[i])
