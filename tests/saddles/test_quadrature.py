"""Random wells: action and determinant of one path follow from two integrals over the potential, done here by SciPy.

With q -> C exp(-omega t) at late times, ln C = ln d + int (omega / sqrt(2 V) - 1/q) dq over the distance d, and
det' O / det O_0 = -+ N / (2 omega^3 C C'), N = int q'^2 (e.g. Zinn-Justin, Quantum Field Theory and Critical
Phenomena, on instantons in quantum mechanics; the zero mode q' is the Gelfand-Yaglom solution). Fixed seeds; no chance.
"""

import math
from collections.abc import Callable

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import brentq

from quarterturn.runs.declaration import action
from quarterturn.runs.saddle import saddle


def tail(slope: Callable[[float], float], distance: float) -> float:
    """C of a path that starts at rest at `distance`, where 2 V = omega^2 q^2 (1 + slope(q) q).

    The difference under the integral is written without cancellation, and q = distance (1 - u^2) takes the root at the
    turning point away.
    """

    def integrand(u: float) -> float:
        q = distance * (1 - u * u)
        root = math.sqrt(max(1 + slope(q) * q, 1e-300))
        return -slope(q) / (root * (1 + root)) * 2 * u * distance

    return distance * math.exp(quad(integrand, 0, 1, limit=400, epsabs=1e-12, epsrel=1e-12)[0])


@pytest.mark.parametrize("seed", range(8))
def test_random_bounces(seed: int) -> None:
    random = np.random.default_rng(seed)
    stiff, cubic, quartic = (float(f"{x:.3f}") for x in random.uniform([0.5, 0.3, -0.4], [4.0, 1.5, 0.1]))
    quartic = min(quartic, float(f"{0.9 * cubic**2 / (2 * stiff):.3f}"))  # so that V falls below zero
    body = f"q(t)\nLE = 1/2 q'^2 + {stiff / 2!r} q^2 - {cubic!r} q^3 + b q^4\nb = {quartic!r}"

    def v(q: float) -> float:
        return q * q * (stiff / 2 - cubic * q + quartic * q * q)

    omega = math.sqrt(stiff)
    roots = np.roots([quartic, -cubic, stiff / 2]) if quartic else np.array([stiff / 2 / cubic])
    end = float(min(r.real for r in roots if abs(r.imag) < 1e-12 and r.real > 0))
    found = saddle(action(body), vacuum=0.0)
    right = float(np.max(found.path)) > -float(np.min(found.path))
    side = 1.0 if right else -1.0  # the way out to the left may be the easier one
    end = end if right else -float(max(r.real for r in roots if r.real < 0))

    def slope(q: float) -> float:
        return 2 / stiff * (quartic * q - side * cubic)

    size = 2 * quad(lambda q: math.sqrt(max(2 * v(side * q), 0)), 0, end, limit=400, epsabs=1e-13)[0]
    assert found["S"] == pytest.approx(size, rel=1e-9)
    exact = -size / (2 * omega**3 * tail(slope, end) ** 2)
    assert found["det'/det_0"] == pytest.approx(exact, rel=1e-8)


@pytest.mark.parametrize("seed", range(8))
def test_random_instantons(seed: int) -> None:
    """V = (q^2 - 1)^2 (a + b q^2 + c q^4), even, so that the path is in the middle at its centre."""
    a, b, c = (float(f"{x:.3f}") for x in np.random.default_rng(100 + seed).uniform([0.3, -0.2, 0], [3, 2, 1]))

    def v(q: float) -> float:
        return (q * q - 1) ** 2 * (a + b * q * q + c * q**4)

    omega = math.sqrt(8 * (a + b + c))
    size = quad(lambda q: math.sqrt(2 * v(q)), -1, 1, epsabs=1e-13)[0]
    half = quad(lambda d: omega / math.sqrt(2 * v(1 - d)) - 1 / d, 1e-7, 1, limit=400, epsabs=1e-12)[0]
    found = saddle(action(f"q(t)\nLE = 1/2 q'^2 + (q^2 - 1)^2 ({a!r} + b q^2 + {c!r} q^4)\nb = {b!r}"))
    assert found["S"] == pytest.approx(size, rel=1e-10)
    constant = math.exp(half)
    assert found["det'/det_0"] == pytest.approx(size / (2 * omega**3 * constant**2), rel=1e-6)


def test_the_turning_point_is_where_the_potential_returns() -> None:
    found = saddle(action("q(t)\nLE = 1/2 q'^2 + 1/2 q^2 - q^3/5 - q^4/20"), vacuum=0.0)
    end = brentq(lambda q: 0.5 - q / 5 - q * q / 20, 0, 10)
    assert float(np.max(found.path)) == pytest.approx(end, rel=1e-3)  # the nearest midpoint of the grid
