"""A first reference form from the potential alone: the best Gaussian path at zero temperature.

Minimises Omega/4 + <V>_G over centre and frequency, the Gaussian variational energy of each whitened variable (the
Feynman-Jensen bound; Feynman, Statistical Mechanics, 1972, ch. 3). It only starts the warm-up, which then measures.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

Floats = NDArray[np.float64]
NODES = 24


def _directions(components: int) -> tuple[Floats, Floats]:
    """Nodes (points, C) and weights of a normal average: Gauss-Hermite for one variable, axis by axis for more."""
    nodes, weights = np.polynomial.hermite_e.hermegauss(NODES)
    weights = weights / weights.sum()
    if components == 1:
        return nodes[:, None], weights
    from scipy.stats import qmc

    points = qmc.MultivariateNormalQMC(np.zeros(components), engine=qmc.Sobol(components, scramble=False))
    cloud = points.random(512)
    return cloud, np.full(len(cloud), 1 / len(cloud))


def gaussian_reference(potential: Callable[[Floats], Floats], components: int, beta: float) -> tuple[Floats, Floats]:
    """(Omega^2, centre), each (C,), of the variational Gaussian for V(x), x whitened of shape (C, points).

    Omega is bounded below by 1/beta, the slowest thing that a periodic path of this extent can feel.
    """
    nodes, weights = _directions(components)

    def energy(v: Floats) -> float:
        log_omega, centre = v[0], v[1:]
        omega = math.exp(min(max(log_omega, -60.0), 60.0))
        x = centre[:, None] + nodes.T / math.sqrt(2 * omega)
        with np.errstate(all="ignore"):
            value = potential(x)
        mean = float(np.sum(weights * np.where(np.isfinite(value), value, 1e30)))
        return components * omega / 4 + mean

    best = min(
        (np.array([start, *np.full(components, c)]) for start in np.linspace(-12, 12, 25) for c in (0.0,)),
        key=energy,
    )
    found = minimize(energy, best, method="Nelder-Mead", options={"maxiter": 400 * (components + 1), "xatol": 1e-3})
    omega = max(math.exp(float(np.clip(found.x[0], -60, 60))), 1 / beta)
    return np.full(components, omega**2), np.asarray(found.x[1:])
