"""Bounces of potentials without a scale, V = -c |phi|^p with p = 2D/(D-2): one of every size, all of one action.

Fubini, Nuovo Cim. A 34 (1976) 521; Lipatov, Sov. Phys. JETP 45 (1977) 216. Released at rest from any value the field
comes to rest at zero, so that this is an initial-value problem.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from quarterturn.saddles.problem import Problem
from quarterturn.saddles.profile import RadialBounce, sphere

Floats = NDArray[np.float64]


def conformal_bounce(problem: Problem, dimension: int) -> RadialBounce | None:
    """The bounce with phi(0) = 1 of V = -c |phi|^p with p = 2D/(D-2), which has one of every size; None for other V.

    Its action does not depend on the size (Fubini, Nuovo Cim. A 34 (1976) 521; Lipatov, Sov. Phys. JETP 45 (1977) 216).
    It is an initial-value problem; the tail beyond the last radius is phi ~ A r^(2-D), which is free.
    """
    if dimension < 3:
        return None
    power = 2 * dimension // (dimension - 2)
    size = np.array([0.03, 0.4, 1.0, 7.0])
    ratio = problem.value(size[None]) / size**power
    if not (np.ptp(ratio) < 1e-10 * abs(ratio[0]) and ratio[0] < 0):
        return None

    def equation(r: float, y: Floats) -> list[float]:
        force = float(problem.slope(y[:1])[0])
        return [y[1], force - (dimension - 1) * y[1] / r, *_densities(problem, r, y, dimension)]

    start = 1e-3 / math.sqrt(abs(ratio[0]))
    force = float(problem.slope(np.array([1.0]))[0])
    first = [1 + force * start**2 / (2 * dimension), force * start / dimension, 0.0, 0.0]
    end = 1e4 / math.sqrt(abs(ratio[0]))
    found = solve_ivp(equation, (start, end), first, method="DOP853", rtol=1e-12, atol=1e-16, dense_output=True)
    r, (phi, slope, gradient, height) = found.t, found.y
    area = sphere(dimension)
    tail = area * slope[-1] ** 2 / 2 * end**dimension / (dimension - 2)  # of the gradient term, phi' ~ r^(1-D)
    first_volume = area * start**dimension / dimension * float(problem.value(np.array([1.0])))
    by_virial = 2 * (gradient[-1] + tail) / dimension
    direct = gradient[-1] + tail + height[-1] + first_volume
    wall = float(brentq(lambda s: float(found.sol(s)[0]) - 0.5, r[0], r[-1]))
    return RadialBounce(
        dimension=dimension, r=r[r < 40 * wall], phi=phi[r < 40 * wall], action=by_virial, radius=wall, thickness=None,
        centre=1.0, false_vacuum=0.0, true_vacuum=None, tension=None, thin_wall=None, negative_mode=None,
        errors={"action": abs(direct - by_virial) + 1e-11 * by_virial, "radius": 1e-9 * wall}, free_size=True,
    )  # fmt: skip


def _densities(problem: Problem, r: float, y: Any, dimension: int) -> list[float]:
    weight = sphere(dimension) * r ** (dimension - 1)
    return [weight * y[1] ** 2 / 2, weight * float(problem.value(y[:1]))]
