"""One degree of freedom as the solvers of this room take it: plain numbers and a function of an array."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class OnePath:
    """L_E = m/2 q'^2 + V(q) - i A q', on the line or on a circle; hbar = 1."""

    mass: float  # m
    potential: Callable[[Floats], Floats]  # V at an array of q
    period: float | None = None  # None: the line; else the circumference of the circle
    flux: float = 0.0  # A; on the circle H = (p - A)^2 / 2m + V, on the line it has no effect
    even: bool = False  # V(-q) = V(q)

    def __post_init__(self) -> None:
        if not (self.mass > 0 and np.isfinite(self.mass)):
            raise SpectrumError(f"the mass must be positive and finite, got {self.mass}")

    def values(self, q: Floats) -> Floats:
        """V(q), with +infinity for walls. Raises SpectrumError where it is not a number or falls without limit."""
        with np.errstate(all="ignore"):
            v = np.broadcast_to(np.asarray(self.potential(q), dtype=np.float64), np.shape(q))
        bad = np.isnan(v)
        if bad.any():
            raise SpectrumError(f"the potential is not a number at q = {np.asarray(q)[bad][0]:.6g}")
        if np.isneginf(v).any():
            raise SpectrumError(f"the potential is minus infinity at q = {np.asarray(q)[np.isneginf(v)][0]:.6g}")
        return np.asarray(v)

    def values_or_wall(self, q: Floats) -> Floats:
        """V(q), with a very high wall where it is not a number or overflows."""
        with np.errstate(all="ignore"):
            v = np.asarray(self.potential(q), dtype=np.float64) * np.ones_like(q)
        return np.where(np.isfinite(v), v, 1e250)
