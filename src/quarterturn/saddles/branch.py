"""Periodic paths by continuation in their period, from the top of a barrier.

A particle near the top x_b of a barrier, where the one negative curvature is -omega_b^2, oscillates in imaginary time
with the period 2 pi / omega_b: there the branch of bounces leaves the static path (the crossover temperature T_c =
omega_b / 2 pi; Affleck, Phys. Rev. Lett. 46 (1981) 388). From there it is followed by Newton's method along its arc
length, so that turning points of the period are passed (Keller, in Applications of Bifurcation Theory, 1977). Where
the path has come to rest at a minimum for most of its period, the period is lengthened by waiting longer.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SaddleError
from quarterturn.saddles.cosine import at, midpoints, resampled, second_derivative, tail
from quarterturn.saddles.problem import Problem
from quarterturn.saddles.rest import Rest

Floats = NDArray[np.float64]
NEWTON_STEPS = 30
SETTLED = 1e-11  # relative size of the last step
RESOLVED = 1e-11  # of the highest cosine coefficients
MOST_POINTS = 1024
FIRST_POINTS = 32
MOST_STEPS = 300
AT_REST = (1e-2, 1e-4, 1e-6)  # distances from the minimum over the extent of the path, where waiting longer is tried
UNRESOLVED = 1e-5  # the same on the way, above which the grid is refined
CORRECTIONS = 12  # steps of Newton's method on the way
AMPLITUDE = 0.03  # of the first path of a branch, over a length set by the potential


@dataclass(frozen=True, eq=False)
class Half:
    """x on [0, L] at midpoints, (n, N), at rest at both ends: half of a path of period 2L."""

    x: Floats
    length: float

    @property
    def points(self) -> int:
        return int(self.x.shape[-1])


@dataclass(eq=False)
class Branch:
    """The paths of one branch: (L, action of half a period) along it, its turning points in the period."""

    steps: list[Half] = field(default_factory=list)
    turning: list[float] = field(default_factory=list)  # periods


def residual(problem: Problem, half: Half) -> Floats:
    """x'' - V'(x), in units of time of L."""
    return np.asarray(half.x @ second_derivative(half.points).T - half.length**2 * problem.slope(half.x))


def jacobian(problem: Problem, half: Half) -> Floats:
    """Of `residual` by x, (nN, nN), components slowest."""
    n, points = half.x.shape
    curvature = problem.curvature(half.x)  # (N, n, n)
    matrix = np.zeros((n, points, n, points))
    inner = np.arange(points)
    for i in range(n):
        matrix[i, :, i, :] = second_derivative(points)
        for j in range(n):
            matrix[i, inner, j, inner] -= half.length**2 * curvature[:, i, j]
    return matrix.reshape(n * points, n * points)


def newton(problem: Problem, half: Half) -> Half | None:
    """The stationary path of the same period next to `half`; None where Newton's method does not settle."""
    x, extent = half.x, _extent(half.x)
    previous = np.inf
    for _ in range(NEWTON_STEPS):
        here = Half(x, half.length)
        rest, matrix = residual(problem, here).ravel(), jacobian(problem, here)
        if not (np.isfinite(rest).all() and np.isfinite(matrix).all()):
            return None
        try:
            step = np.linalg.solve(matrix, -rest).reshape(x.shape)
        except np.linalg.LinAlgError:
            return None
        size = float(np.max(np.abs(step)))
        x = x + step * min(1.0, 0.3 * extent / max(size, 1e-300))
        if size <= SETTLED * extent or (size <= 1e-8 * extent and size > 0.3 * previous):
            return Half(x, half.length)
        previous = size
    return None


def _extent(x: Floats) -> float:
    return float(np.max(np.ptp(x, axis=-1))) or 1.0


def resolved(problem: Problem, half: Half) -> Half | None:
    """The same path on as many points as it needs, sharpened on each grid; None where it is lost.

    Raises SaddleError where even the largest grid does not resolve it.
    """
    while (last := tail(half.x)) > RESOLVED:
        if half.points >= MOST_POINTS:
            if last < 1e-7:
                return half
            raise SaddleError(
                f"the path is not resolved by {half.points} points: the potential is too rough or its times "
                "differ too much; use levels"
            )
        finer = newton(problem, Half(resampled(half.x, 2 * half.points), half.length))
        if finer is None:
            return None
        half = finer
    return half


@dataclass(frozen=True)
class _Scales:
    """A length of the problem, from the vacuum to the barrier; and what a change of L counts for in units of it."""

    unit: float
    pace: float

    def norm(self, x: Floats, length: float) -> float:
        return float(np.sqrt(np.mean(np.sum(x**2, axis=0)) + (self.pace * length) ** 2))


def follow(problem: Problem, barrier: Rest, vacuum: Rest, length: float, closeness: float = AT_REST[0]) -> Branch:
    """Follow the branch that leaves `barrier` until the path rests at `vacuum` or L is three times `length`.

    A branch that ends elsewhere is cut there.
    """
    omega, unit = float(barrier.frequencies[0]), float(np.linalg.norm(barrier.x - vacuum.x))
    scales, branch = _Scales(unit, 0.1 * omega * unit), Branch()
    shape = barrier.axes[:, :1] * np.cos(np.pi * midpoints(FIRST_POINTS))
    previous = Half(np.broadcast_to(barrier.x[:, None], shape.shape).copy(), np.pi / omega)
    first = Half(previous.x + AMPLITUDE * unit * shape, np.pi / omega)
    here = _corrected(problem, first, (unit * shape, 0.0), scales)  # the amplitude is held, the period adapts
    step, slope = 2 * AMPLITUDE * unit, 0.0
    for _ in range(MOST_STEPS):
        if here is None:
            break
        branch.steps.append(here)
        change = here.length - previous.length
        if slope * change < 0:
            extreme = max if slope > 0 else min
            branch.turning.append(2 * extreme(here.length, previous.length))
        slope = change or slope
        if here.length > 3 * length or rests_at(here, vacuum, closeness):
            break
        previous, here, step = _advanced(problem, previous, here, step, scales)
    return branch


def _advanced(
    problem: Problem, previous: Half, here: Half, step: float, scales: _Scales
) -> tuple[Half, Half | None, float]:
    """The last two paths one step further on, and the length of the next step; None where the branch is lost."""
    while step > 1e-6 * scales.unit:
        x, length = here.x - previous.x, here.length - previous.length
        norm = scales.norm(x, length)
        x, length = x / norm, length / norm
        guess = Half(here.x + step * x, here.length + step * length)
        found = _corrected(problem, guess, (x, length), scales) if guess.length > 0 else None
        if found is None:
            step /= 2
        elif tail(found.x) > UNRESOLVED and found.points < MOST_POINTS:
            here, previous = (Half(resampled(h.x, 2 * h.points), h.length) for h in (here, previous))
        else:
            return here, found, min(1.3 * step, 0.5 * scales.unit)
    return previous, None, step


def _corrected(problem: Problem, guess: Half, tangent: tuple[Floats, float], scales: _Scales) -> Half | None:
    """Newton's method on the path and its period at once, on the plane through `guess` normal to `tangent`."""
    x, length = guess.x, guess.length
    n, points = x.shape
    weights = tangent[0].ravel() / points, tangent[1] * scales.pace**2
    for _ in range(CORRECTIONS):
        rest = residual(problem, Half(x, length)).ravel()
        matrix = np.zeros((n * points + 1, n * points + 1))
        matrix[:-1, :-1] = jacobian(problem, Half(x, length))
        matrix[:-1, -1] = -2 * length * problem.slope(x).ravel()
        matrix[-1, :-1], matrix[-1, -1] = weights
        plane = weights[0] @ (x - guess.x).ravel() + weights[1] * (length - guess.length)
        if not (np.isfinite(matrix).all() and np.isfinite(rest).all()):
            return None
        try:
            step = np.linalg.solve(matrix, -np.append(rest, plane))
        except np.linalg.LinAlgError:
            return None
        x, length = x + step[:-1].reshape(x.shape), length + float(step[-1])
        size = float(np.max(np.abs(step[:-1])))
        if not length > 0 or size > scales.unit:
            return None
        if size <= 1e-9 * scales.unit:
            return Half(x, length)
    return None


def rests_at(half: Half, vacuum: Rest, closeness: float = AT_REST[0]) -> bool:
    """Whether one end of the path lies at the vacuum, closely."""
    ends = half.x[:, [0, -1]] - vacuum.x[:, None]
    return bool(np.min(np.linalg.norm(ends, axis=0)) < closeness * _extent(half.x))


def at_period(problem: Problem, branch: Branch, length: float) -> list[Half]:
    """All paths of the branch with half period `length`, sharpened."""
    found: list[Half] = []
    for before, after in zip(branch.steps, branch.steps[1:], strict=False):
        low, high = before.length, after.length
        if (low - length) * (high - length) > 0 or low == high:
            continue
        part = (length - low) / (high - low)
        points = max(before.points, after.points)
        mixed = (1 - part) * resampled(before.x, points) + part * resampled(after.x, points)
        path = newton(problem, Half(mixed, length))
        path = None if path is None else resolved(problem, path)
        if path is not None and _extent(path.x) > 1e-6:
            found.append(path)
    return found


def prolonged(problem: Problem, half: Half, vacuum: Rest, length: float) -> Half | None:
    """The path that waits at the vacuum until its half period is `length`; None where it is lost."""
    ends = np.linalg.norm(half.x[:, [0, -1]] - vacuum.x[:, None], axis=0)
    x = half.x if ends[1] < ends[0] else half.x[:, ::-1]
    points = half.points
    while half.length < length * (1 - 1e-12):
        longer = min(1.4 * half.length, length)
        while points < 2 * longer / half.length * half.points / 1.6 and points < MOST_POINTS:
            points *= 2
        s = midpoints(points) * longer / half.length
        omega = float(vacuum.frequencies[0])
        last = vacuum.x[:, None] + (x[:, -1:] - vacuum.x[:, None]) * np.exp(-omega * half.length * np.maximum(s - 1, 0))
        inside = np.where(s <= 1, at(x, np.minimum(s, 1.0)), last)
        found = newton(problem, Half(inside, longer))
        found = None if found is None else resolved(problem, found)
        if found is None:
            return None
        half, x, points = found, found.x, found.points
    return Half(x, half.length)
