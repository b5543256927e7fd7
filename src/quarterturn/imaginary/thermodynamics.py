"""Partition function, free energy, entropy and heat capacity from a spectrum, over any range of temperatures."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.spectrum import Spectrum
from quarterturn.imaginary.warm import warmed

Floats = NDArray[np.float64]
NEGLIGIBLE = 1e-17


@dataclass(frozen=True, eq=False)
class Thermodynamics:
    """Functions of the inverse temperature, each (B,); units of the notation, Boltzmann's constant 1."""

    beta: Floats
    partition: Floats  # Z = sum exp(-beta E_n)
    free_energy: Floats  # -ln Z / beta
    energy: Floats  # <H>
    entropy: Floats  # beta (<H> - F)
    heat_capacity: Floats  # beta^2 (<H^2> - <H>^2)
    energy_error: float  # of a level


def thermodynamics(spectrum: Spectrum, betas: Sequence[float] | Floats) -> Thermodynamics:
    """All functions at each inverse temperature, from one solution that is good for the highest temperature.

    Entropy and heat capacity are sums of positive terms, so that they keep their digits where they are exponentially
    small.

    Raises
    ------
    SpectrumError
        A beta that is not positive, a continuum, or a temperature that needs too many levels.
    """
    given = np.atleast_1d(np.asarray(betas, dtype=np.float64))
    if given.ndim != 1 or not given.size:
        raise SpectrumError("beta must be a number or a list of numbers")
    if not np.all((given > 0) & np.isfinite(given)):
        raise SpectrumError("every beta must be positive and finite")
    thermal, error = warmed(spectrum, float(given.min()))
    above = thermal.values
    ground = float(above[0])
    rows = [_at(above - ground, ground, float(beta)) for beta in given]
    partition, free, energy, entropy, capacity = (np.array(column) for column in zip(*rows, strict=True))
    return Thermodynamics(given, partition, free, energy, entropy, capacity, error)


def _at(above: Floats, ground: float, beta: float) -> tuple[float, float, float, float, float]:
    weights = np.exp(-beta * above)
    weights = weights[weights > NEGLIGIBLE]
    excited = above[: len(weights)]
    others = float(np.sum(weights[1:]))
    log_z = np.log1p(others)
    p = weights / (1 + others)
    mean = float(p @ excited)
    variance = float(p @ (excited - mean) ** 2)
    free = float(ground - log_z / beta)
    entropy, capacity = float(beta * mean + log_z), float(beta**2 * variance)
    return float(np.exp(-beta * free)), free, ground + mean, entropy, capacity
