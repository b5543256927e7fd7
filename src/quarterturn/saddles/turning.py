"""The bounce of one path from its turning point, found by the conservation of energy.

A particle that leaves the minimum at rest comes to rest again where V has fallen to its value there; released from that
point it runs back, over however many barriers, and its course is a start for Newton's method. Where the start lies is
known beforehand, so nothing is searched for by over- and undershooting.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from quarterturn.saddles.branch import Half, newton, resolved
from quarterturn.saddles.cosine import midpoints
from quarterturn.saddles.landscape import Landscape
from quarterturn.saddles.rest import Rest, samples

Floats = NDArray[np.float64]
CLOSE = 0.01  # distance from the minimum, over that of the turning point, below which the path is exponential
POINTS = 256
PRECISION = 1e-12


def run_back(land: Landscape, vacuum: Rest, side: float, length: float) -> tuple[Half, Rest] | None:
    """The bounce out of `vacuum` to the side of the sign `side`, with half period `length`; and its highest barrier.

    None where V nowhere falls to its value at the minimum, or Newton's method does not settle.
    """
    point = _turning_point(land, vacuum, side)
    if point is None:
        return None
    start, extent = float(vacuum.x[0]), abs(point - float(vacuum.x[0]))
    omega = float(vacuum.frequencies[0])

    def equation(t: float, y: Floats) -> list[float]:
        return [y[1], float(land.problem.slope(y[:1])[0])]

    def arrived(t: float, y: Floats) -> float:
        return float(abs(y[0] - start) - CLOSE * extent)

    arrived.terminal = True  # type: ignore[attr-defined]
    course = solve_ivp(
        equation, (0.0, length), [point, 0.0], method="DOP853", rtol=PRECISION, atol=PRECISION * extent,
        events=arrived, dense_output=True,
    )  # fmt: skip
    if not len(course.t_events[0]):
        return None
    end = float(course.t[-1])
    t = length * midpoints(POINTS)
    x = start + (course.y[0, -1] - start) * np.exp(-omega * np.maximum(t - end, 0.0))
    x[t < end] = course.sol(t[t < end])[0]
    path = newton(land.problem, Half(x[None], length))
    path = None if path is None else resolved(land.problem, path)
    if path is None or abs(float(path.x[0, 0]) - point) > CLOSE * extent:
        return None
    between = [r for r in land.points if 0 < side * (float(r.x[0]) - start) < extent and r.negative == 1 and not r.flat]
    return (path, max(between, key=lambda r: r.height)) if between else None


def _turning_point(land: Landscape, vacuum: Rest, side: float) -> float | None:
    """The first point to that side, beyond all that is higher, at which V is what it is at the minimum."""
    start = float(vacuum.x[0])
    q = samples(land.problem)
    q = q[side * (q - start) > 0]
    q = np.sort(q) if side > 0 else np.sort(q)[::-1]
    height = land.problem.value(q[None]) - vacuum.height
    risen = int(np.argmax(height > 0))
    fallen = np.flatnonzero(height[risen:] < 0)
    if not len(fallen) or not height[risen] > 0:
        return None
    k = risen + int(fallen[0])
    if not np.isfinite(height[risen:k]).all():
        return None
    return float(
        brentq(
            lambda x: float(land.problem.value(np.array([x]))) - vacuum.height,
            q[k - 1],
            q[k],
            xtol=1e-300,
            rtol=8.9e-16,
        )
    )
