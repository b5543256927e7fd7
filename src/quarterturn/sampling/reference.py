"""A first reference form from the potential alone: the best Gaussian path at the temperature of the path.

Minimises the Gibbs-Bogoliubov bound F_0 + <V - 1/2 Omega^2 (x - c)^2>_0 over centre and frequency of the whitened
variables (Feynman, Statistical Mechanics, 1972, ch. 3). It only starts the warm-up, which then measures.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

from quarterturn.sampling.points import PointAction, lowest_frequency_squared

Floats = NDArray[np.float64]
NODES = 24
CLOUD = 128  # points of the average for several variables, and as many mirrored ones
LOG_LIMIT = 30.0


def _directions(components: int) -> tuple[Floats, Floats]:
    """Nodes (points, C) and weights of a normal average: Gauss-Hermite for one variable, mirrored noise for more."""
    if components == 1:
        nodes, weights = np.polynomial.hermite_e.hermegauss(NODES)
        return nodes[:, None], weights / weights.sum()
    half = np.random.default_rng(1).standard_normal((CLOUD, components))
    cloud = np.concatenate([half, -half])
    return cloud, np.full(len(cloud), 1 / len(cloud))


def gaussian_reference(points: PointAction) -> tuple[Floats, Floats]:
    """(Omega^2, centre), each (C,), of the best Gaussian; one frequency for all variables."""
    components, beta = points.target.components, points.beta
    nodes, weights = _directions(components)

    def bound(v: Floats) -> float:
        omega = math.exp(min(max(v[0], -LOG_LIMIT), LOG_LIMIT))
        half = beta * omega / 2
        spread = 1 / (2 * omega * math.tanh(half))
        free = (half + math.log1p(-math.exp(-2 * half))) / beta
        value = points.potential(v[1:, None] + nodes.T * math.sqrt(spread))
        mean = float(np.sum(weights * _finite(value)))
        return mean + components * (free - omega**2 * spread / 2)

    centres = _centres(components)
    deepest = centres[int(np.argmin([_finite(points.potential(c)) for c in centres]))]
    sizes = np.linspace(-14, 14, 29)
    best = min((np.array([s, *c]) for s in sizes for c in (centres[0], deepest)), key=bound)
    found = minimize(bound, best, method="Powell", options={"maxiter": 10, "xtol": 1e-2, "ftol": 1e-4})
    v = found.x if bound(found.x) <= bound(best) else best
    omega = math.exp(float(np.clip(v[0], -LOG_LIMIT, LOG_LIMIT)))
    return np.maximum(np.full(components, omega**2), lowest_frequency_squared(points)), np.asarray(v[1:])


def _finite(value: Floats) -> Floats:
    """What is not a number, or beyond all numbers, is very high."""
    return np.where(np.isfinite(value), np.clip(value, -1e30, 1e30), 1e30)


def _centres(components: int) -> list[Floats]:
    """Points to begin from: the origin, and both sides of it along each axis at four sizes."""
    along = [size * sign * axis for axis in np.eye(components) for size in (0.1, 1.0, 10.0, 100.0) for sign in (1, -1)]
    return [np.zeros(components), *along]
