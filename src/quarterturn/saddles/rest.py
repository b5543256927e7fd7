"""Where a particle may rest: minima of the potential and the tops of its barriers.

One variable is looked at on points spread over twelve decades to both sides of zero, or over three turns of a circle,
so that a path around it joins two points; each change of sign of V' is sharpened by bisection. Several variables are
searched by Newton's method from many starts, the same ones every time.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.stats import qmc

from quarterturn.errors import SaddleError
from quarterturn.saddles.problem import Problem

Floats = NDArray[np.float64]
DECADES = (-6.0, 6.0)
POINTS_A_DECADE = 60
POINTS_LINEAR = 4001  # more of them within a few units of zero, where most potentials have their structure
REACH = 12.0
STARTS = 4096
MOST_KEPT = 60
SAME = 1e-5  # relative distance below which two points are one
FLAT = 1e-6  # of the curvature nearby, below which a curvature is none
NEARBY = 0.05  # as a part of the distance to the next point of rest, or of 1 + |x| where that is less
EQUAL = 1e-9  # of the barrier, within which two minima are degenerate


@dataclass(frozen=True, eq=False)
class Rest:
    """A point with V' = 0: `curvatures` ascending, `axes` their directions as columns."""

    x: Floats  # (n,)
    height: float
    curvatures: Floats  # (n,)
    axes: Floats  # (n, n)
    scale: float  # of curvatures nearby

    @property
    def negative(self) -> int:
        return int(np.sum(self.curvatures < -FLAT * self.scale))

    @property
    def flat(self) -> bool:
        """Whether some curvature vanishes."""
        return bool(np.min(np.abs(self.curvatures)) <= FLAT * self.scale)

    @property
    def frequencies(self) -> Floats:
        return np.sqrt(np.abs(self.curvatures))


def rest_points(problem: Problem) -> list[Rest]:
    """All points of rest found, lowest first; of very many those that are closest to zero."""
    points = list(_one(problem)) if problem.size == 1 else list(_many(problem))
    points = sorted(points, key=lambda x: float(np.linalg.norm(x)))[:MOST_KEPT]
    found: list[Rest] = []
    for k, x in enumerate(points):
        others = [float(np.linalg.norm(x - y)) for y in points[:k] + points[k + 1 :]]
        near = NEARBY * min([*others, 1 + float(np.linalg.norm(x))])
        values, vectors = np.linalg.eigh(problem.curvature(x))
        height = float(problem.value(x))
        if np.isfinite(values).all() and np.isfinite(height):
            around = x[:, None] + near * np.array([-1.0, 1.0])
            scale = np.nanmax(np.abs([*values, *np.ravel(problem.curvature(around))]))
            found.append(Rest(x, height, values, vectors, float(scale)))
    scale = float(np.ptp([r.height for r in found])) if found else 0.0
    return sorted(found, key=lambda r: (round(r.height / (scale or 1.0), 9), *map(float, r.x)))


def samples(problem: Problem) -> Floats:
    """Points of one variable at which its potential is looked at, ascending."""
    scale = float(problem.to_q[0, 0])
    if problem.periods[0] is not None:
        return np.linspace(-1.5, 1.5, POINTS_LINEAR) * problem.periods[0] / scale
    size = np.logspace(*DECADES, round(POINTS_A_DECADE * (DECADES[1] - DECADES[0])) + 1)
    q = np.concatenate([-size, size, np.linspace(-REACH, REACH, POINTS_LINEAR)])
    return np.unique(q) / scale


def _one(problem: Problem) -> Iterator[Floats]:
    x = samples(problem)
    slope = problem.slope(x[None])[0]

    def at(point: float) -> float:
        return float(problem.slope(np.array([point]))[0])

    step = np.median(np.diff(x))
    for i in np.flatnonzero(np.isfinite(slope[:-1]) & np.isfinite(slope[1:])):
        if slope[i] == 0:
            yield x[i : i + 1].copy()
        elif np.sign(slope[i]) != np.sign(slope[i + 1]) and slope[i + 1] != 0:
            root = brentq(at, x[i], x[i + 1], xtol=1e-15 * max(abs(x[i]), step), rtol=8.9e-16, maxiter=500)
            if abs(at(root)) <= 1e-6 * max(abs(slope[i]), abs(slope[i + 1])):  # not a pole
                yield np.array([root])


def _many(problem: Problem) -> Iterator[Floats]:
    """Newton's method from points of a Sobol sequence at many distances; damped, all starts at once."""
    n = problem.size
    unit = qmc.Sobol(n + 1, scramble=False).random(STARTS)
    direction = 2 * unit[:, :n] - 1
    q = (direction * 10.0 ** (6 * unit[:, n:] - 3)).T
    for k, period in enumerate(problem.periods):
        if period is not None:
            q[k] = 1.5 * period * direction[:, k]
    x = problem.x(q)
    for _ in range(80):
        slope, curvature = problem.slope(x), problem.curvature(x)
        good = np.isfinite(slope).all(axis=0) & np.isfinite(curvature).all(axis=(1, 2))
        x, slope, curvature = x[:, good], slope[:, good], curvature[good]
        if not x.shape[1]:
            return
        step = -np.einsum("kij,jk->ik", np.linalg.pinv(curvature, rcond=1e-12), slope)
        size, room = np.linalg.norm(step, axis=0), 0.5 * np.linalg.norm(x, axis=0) + 0.3
        x = x + step * np.minimum(1.0, room / np.maximum(size, 1e-300))
        settled = size <= 1e-12 * (np.linalg.norm(x, axis=0) + 1e-3)
        if settled.all():
            break
    x = x[:, settled]
    yield from _different(x.T)


def _different(points: Floats) -> Iterator[Floats]:
    points = points[np.linalg.norm(points, axis=1) < 1e6]
    sizes = np.linalg.norm(points, axis=1)
    scale = float(np.median(sizes[sizes > 1e-9])) if (sizes > 1e-9).any() else 1.0
    while len(points):
        first = points[0]
        yield first + 0.0
        points = points[np.linalg.norm(points - first, axis=1) > SAME * scale]


def curved_minima(problem: Problem, points: list[Rest]) -> list[Rest]:
    """The minima among `points`. Raises SaddleError where there is none, or where they form a continuous family."""
    lowest = [r for r in points if not r.negative]
    minima = [r for r in lowest if not r.flat]
    if minima and len(lowest) <= len(minima) + 1:
        return minima
    if lowest or any(r.flat for r in points):
        if problem.size > 1:
            raise SaddleError(
                "the minima form a continuous family (the potential is flat along a direction there), so that paths "
                "between them cost no barrier: use levels, or sample it"
            )
        if not minima:
            raise SaddleError(
                "the potential has no curvature at its minimum, so that fluctuations about it have no frequency "
                "and the "
                "one-loop formulas do not apply: use levels"
            )
        return minima
    raise SaddleError("the potential has no minimum from which a path could tunnel; levels and sample need none")
