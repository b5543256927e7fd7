"""Instantons: paths from one minimum of the potential to another of the same height.

Such a path is a minimum of the action but for its free centre. It is found from a straight path, and with several
variables also from bent ones, by Newton's method with a Levenberg-Marquardt shift that falls to zero, steps along the
free motion in time taken out; the lowest action is kept, the others are told.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SaddleError
from quarterturn.saddles.branch import MOST_POINTS, RESOLVED, Half, jacobian, residual
from quarterturn.saddles.cosine import at, kinetic, midpoints, moments, resampled, tail
from quarterturn.saddles.problem import Problem
from quarterturn.saddles.rest import Rest

Floats = NDArray[np.float64]
WAITING = 25.0  # omega L / 2: what is left of the path at its ends is exp(-WAITING)
FIRST_POINTS = 128
MOST_STEPS = 60
ENDS = 0.02  # parts of the action that belong to the ends of the path
RESTING = 1e-3  # of the barrier: below, a path is at rest
BENDS = (0.0, 0.5, -0.5, 1.0, -1.0)  # over the distance of the minima


def instantons(problem: Problem, start: Rest, end: Rest) -> list[Half]:
    """The different paths from `start` to `end` that were found, lowest action first; empty where there is none."""
    omega = float(min(start.frequencies[0], end.frequencies[0]))
    extent = float(np.linalg.norm(end.x - start.x))

    def sound(path: Half | None) -> bool:
        return path is not None and _arrives(path, start, end, extent) and not _composite(problem, path, start)

    rough = [_downhill(problem, guess) for guess in _guesses(start, end, 2 * WAITING / omega)]
    fine = [_resolved(problem, path) for path in _different(filter(sound, rough), 1e-3)]
    return sorted(_different(filter(sound, fine), 1e-5), key=lambda path: kinetic(path.x, path.length))


def _different(paths: Iterable[Half | None], tolerance: float) -> list[Half]:
    """Those that differ in their action or in their moments by more than a relative `tolerance`."""
    found: list[tuple[Floats, Half]] = []
    for path in paths:
        if path is None:
            continue
        mark = np.append(kinetic(path.x, path.length), moments(path.x))
        if all(np.max(np.abs(mark - other)) > tolerance * np.max(np.abs(mark)) for other, _ in found):
            found.append((mark, path))
    return [path for _, path in found]


def _arrives(path: Half, start: Rest, end: Rest, extent: float) -> bool:
    ends = at(path.x, np.array([0.0, 1.0])) - np.stack([start.x, end.x], axis=1)
    return bool(np.max(np.linalg.norm(ends, axis=0)) < 1e-3 * extent)


def _composite(problem: Problem, path: Half, start: Rest) -> bool:
    """Whether the path comes to rest on its way, at a third minimum: instantons in a row, at a free distance."""
    speed = np.sum(at(path.x, midpoints(path.points), order=1) ** 2, axis=0)
    part = np.cumsum(speed) / np.sum(speed)
    height = problem.value(path.x)[(part > ENDS) & (part < 1 - ENDS)] - start.height
    return bool(np.min(height) < RESTING * np.max(height))


def _guesses(start: Rest, end: Rest, length: float) -> Iterator[Half]:
    s = midpoints(FIRST_POINTS)
    omega = float(max(start.frequencies[0], end.frequencies[0]))
    step = (1 + np.tanh(omega * length * (s - 0.5) / 2)) / 2
    across = end.x - start.x
    straight = start.x[:, None] + across[:, None] * step
    yield Half(straight, length)
    normals = np.linalg.svd(across[None])[2][1:]
    for normal in normals:
        for bend in BENDS[1:]:
            bump = 4 * step * (1 - step) * bend * np.linalg.norm(across)
            yield Half(straight + normal[:, None] * bump, length)


def _resolved(problem: Problem, half: Half) -> Half | None:
    """The path on as many points as it needs. Raises SaddleError where even the largest grid does not resolve it."""
    path: Half | None = half
    while path is not None and (last := tail(path.x)) > RESOLVED:
        if path.points >= MOST_POINTS:
            if last < 1e-7:
                break
            raise SaddleError(
                f"the path from minimum to minimum is not resolved by {path.points} points: the potential is too "
                "rough, or its times differ too much; use levels"
            )
        path = _downhill(problem, Half(resampled(path.x, 2 * path.points), path.length))
    return path


def _action(problem: Problem, half: Half, floor: float) -> float:
    return kinetic(half.x, half.length) / 2 + half.length * float(np.mean(problem.value(half.x) - floor))


def _downhill(problem: Problem, half: Half) -> Half | None:
    """Newton's method on the action, shifted until each step lowers it; None where it does not settle."""
    x, shift, extent = half.x, 1e-3, float(np.max(np.ptp(half.x, axis=-1)))
    floor = float(np.min(problem.value(at(half.x, np.array([0.0, 1.0])))))
    value = _action(problem, half, floor)
    unit = half.length**2
    previous = np.inf
    for _ in range(MOST_STEPS):
        here = Half(x, half.length)
        rest, matrix = residual(problem, here).ravel() / unit, -jacobian(problem, here) / unit
        if not (np.isfinite(rest).all() and np.isfinite(matrix).all()):
            return None
        # the free motion: x' by the series
        free = at(x, midpoints(here.points), order=1).ravel()
        free = free / np.linalg.norm(free)
        matrix = matrix + np.outer(free, free) * np.trace(matrix) / len(free)
        matrix[np.diag_indices(len(free))] += shift
        rest = rest - free * (free @ rest)
        step = np.linalg.solve(matrix, rest).reshape(x.shape)
        size = float(np.max(np.abs(step)))
        new = x + step * min(1.0, 0.3 * extent / max(size, 1e-300))
        after = _action(problem, Half(new, half.length), floor)
        if size <= 1e-9 * extent or (size <= 1e-6 * extent and size > 0.5 * previous and shift < 1e-12):
            return Half(new, half.length)
        if after <= value + 1e-12 * abs(value):
            x, value, shift, previous = new, after, shift / 10 if shift > 1e-13 else 0.0, size
        else:
            shift = max(shift * 8, 1e-8)
            if shift > 1e8:
                return None
    return None
