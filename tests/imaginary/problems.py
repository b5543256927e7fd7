"""Potentials that the outside values belong to."""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from quarterturn.imaginary.problem import OnePath

Floats = NDArray[np.float64]
TURN = 2 * np.pi


def line(potential: Callable[[Floats], Floats], mass: float = 1.0) -> OnePath:
    return OnePath(mass, potential)


def even(potential: Callable[[Floats], Floats], mass: float = 1.0) -> OnePath:
    return OnePath(mass, potential, even=True)


def oscillator(omega: float = 1.0, mass: float = 1.0) -> OnePath:
    return even(lambda q: mass * omega**2 * q**2 / 2, mass)


def anharmonic(lam: float) -> OnePath:
    return even(lambda q: q**2 / 2 + lam * q**4)


def double_well(lam: float, v2: float) -> OnePath:
    return even(lambda q: lam * (q**2 - v2) ** 2)


def pendulum(k: float, flux: float = 0.0, inertia: float = 1.0) -> OnePath:
    return OnePath(inertia, lambda q: -k * np.cos(q), TURN, flux, even=True)


def rotor(inertia: float, flux: float = 0.0) -> OnePath:
    return OnePath(inertia, lambda q: 0 * q, TURN, flux, even=True)


def tilted_double_well(g: float) -> OnePath:
    """Zinn-Justin's convention: minima at 0 and 1/sqrt(g), symmetric about neither."""
    return line(lambda q: q**2 * (1 - np.sqrt(g) * q) ** 2 / 2)
