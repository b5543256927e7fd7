"""One degree of freedom as the solvers of this room take it: plain numbers and a function of an array."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError

Floats = NDArray[np.float64]
Local = Callable[[Floats], Floats]  # a function of the path at one time, at an array of its values


@dataclass(frozen=True)
class OnePath:
    """L_E = m/2 q'^2 + V(q) - i A q', on the line or on a circle; hbar = 1.

    On the circle H = (p - A)^2 / 2m + V with periodic wave functions (a theta term has A = theta / period, a Bloch
    momentum k is A = -k); on the line A can be transformed away and has no effect. `even` promises V(-q) = V(q).
    """

    mass: float
    potential: Local
    period: float | None = None  # None: the line; else the circumference of the circle
    flux: float = 0.0  # A
    even: bool = False

    def __post_init__(self) -> None:
        if not (self.mass > 0 and math.isfinite(self.mass)):
            raise SpectrumError(f"the mass must be positive and finite, got {self.mass}")
        if self.period is not None and not (self.period > 0 and math.isfinite(self.period)):
            raise SpectrumError(f"the period must be positive and finite, got {self.period}")
        if not math.isfinite(self.flux):
            raise SpectrumError(f"the coefficient of i q' must be finite, got {self.flux}")

    def raw(self, q: Floats) -> Floats:
        """V(q) as it comes, with infinities and not-a-numbers; warnings of NumPy silenced."""
        with np.errstate(all="ignore"):
            value = np.asarray(self.potential(q), dtype=np.float64)
        return value if value.shape == q.shape else np.broadcast_to(value, q.shape).copy()

    def values(self, q: Floats) -> Floats:
        """V(q), +infinity where there is a wall. Raises SpectrumError where V is not a number or minus infinity."""
        v = self.raw(q)
        if np.isnan(v).any():
            raise SpectrumError(f"the potential is not a number at q = {q[np.isnan(v)][0]:.6g}")
        if np.isneginf(v).any():
            raise SpectrumError(f"the potential is minus infinity at q = {q[np.isneginf(v)][0]:.6g}")
        return v
