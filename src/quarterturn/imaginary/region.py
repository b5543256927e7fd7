"""Where a potential on the line confines: its minimum, its scale, and the region that a given energy fills.

The search is free of scales: the potential is looked at on points spread over sixteen decades to both sides of zero,
then refined. The width of the region follows from the semiclassical decay exp(-int sqrt(2m(V - E)) dq).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize_scalar

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.problem import OnePath

Floats = NDArray[np.float64]
DECADES = (-8, 8)
POINTS_A_DECADE = 60
DECAY = 40.0  # exponents of decay after which a wave function is zero to rounding: exp(-40) = 4e-18


@dataclass(frozen=True)
class Well:
    """The lowest point of a potential, its scale, and where it ends to both sides."""

    centre: float
    bottom: float  # V there
    width: float  # distance at which V - bottom = 1/(2 m width^2)
    threshold: float  # the lower of the two limits of V far away; infinity where it confines

    def energy_scale(self, mass: float) -> float:
        return 1 / (2 * mass * self.width**2)


def spread_points() -> Floats:
    """Zero and logarithmically spaced points to both sides."""
    size = np.logspace(*DECADES, POINTS_A_DECADE * (DECADES[1] - DECADES[0]) + 1)
    return np.concatenate([-size[::-1], [0.0], size])


def find_well(problem: OnePath) -> Well:
    """The deepest well. Raises SpectrumError where the potential falls without limit or confines nowhere."""
    q = spread_points()
    with np.errstate(all="ignore"):
        v = np.asarray(problem.potential(q), dtype=np.float64) * np.ones_like(q)
    if (v < -1e290).any():
        where = q[np.argmin(np.where(v < -1e290, np.abs(q), np.inf))]
        raise SpectrumError(f"the potential falls without limit at q = {where:.6g}: the path collapses there")
    far = np.isnan(v) | (np.abs(v) > 1e290)  # overflow far away: the last number there tells the sign
    v = _without_overflow(q, v, far)
    if np.ptp(v) == 0:
        raise SpectrumError("the potential is flat: nothing is bound, and a path drifts without end")
    k = int(np.argmin(v))
    if k < 3 or k > len(q) - 4:
        side = "minus infinity" if k < 3 else "infinity"
        raise SpectrumError(
            f"the potential has no lowest point: it still falls towards q = {side}, so nothing is bound"
        )
    found = minimize_scalar(
        lambda x: float(problem.values(np.array([x]))[0]), bounds=(q[k - 2], q[k + 2]), method="bounded",
        options={"xatol": 1e-9 * (abs(q[k]) + 1e-9)},
    )  # fmt: skip
    centre, bottom = (float(found.x), float(found.fun)) if found.fun <= v[k] else (float(q[k]), float(v[k]))
    ends = [v[0], v[-1]]
    pairs = zip(ends, (v[60], v[-61]), strict=True)
    limits = [e for e, inner in pairs if np.isfinite(e) and abs(e - inner) <= 1e-9 * max(1.0, abs(e))]
    threshold = min(limits) if limits else np.inf
    return Well(centre, bottom, _width(problem, centre, bottom), float(threshold))


def _without_overflow(q: Floats, v: Floats, far: NDArray[np.bool_]) -> Floats:
    if not far.any():
        return v
    v = v.copy()
    inside = np.flatnonzero(~far)
    if not len(inside):
        raise SpectrumError("the potential is not a number anywhere")
    for i in np.flatnonzero(np.isnan(v)):
        near = inside[np.argmin(np.abs(inside - i))]
        if abs(q[i]) < 1e3 or not abs(v[near]) > 1e30:
            raise SpectrumError(f"the potential is not a number at q = {q[i]:.6g}")
        v[i] = v[near]
    return v


def _width(problem: OnePath, centre: float, bottom: float) -> float:
    """Solves (V(centre ± w) - bottom) 2 m w^2 = 1 for the narrower side, on a logarithmic scale."""
    size = np.logspace(DECADES[0], DECADES[1], 800)
    with np.errstate(all="ignore"):
        rise = np.minimum(problem.values_or_wall(centre - size), problem.values_or_wall(centre + size)) - bottom
        reached = np.flatnonzero(rise * 2 * problem.mass * size**2 >= 1)
    if not len(reached):
        raise SpectrumError("the potential is too flat to bind anything within sixteen decades of q")
    return float(size[reached[0]])


def extent(problem: OnePath, well: Well, energy: float, decay: float = DECAY) -> tuple[float, float]:
    """The interval in which wave functions up to `energy` differ from zero.

    Raises SpectrumError where they do not end: the energy lies in the continuum.
    """
    return end_of_decay(problem, well, energy, -1.0, decay), end_of_decay(problem, well, energy, 1.0, decay)


def end_of_decay(problem: OnePath, well: Well, energy: float, side: float, decay: float) -> float:
    """The point to one side (+1 or -1) at which a wave function of this energy has fallen by exp(-decay)."""
    reach = well.width
    for _ in range(200):
        x = np.linspace(0.0, reach, 400)
        v = problem.values_or_wall(well.centre + side * x)
        rate = np.sqrt(2 * problem.mass * np.clip(v - energy, 0.0, 1e250))
        inside = np.flatnonzero(rate == 0)
        start = inside[-1] if len(inside) else 0
        steps = np.concatenate([[0.0], np.cumsum((rate[1:] + rate[:-1]) / 2 * np.diff(x))])
        total = steps - steps[start]
        if total[-1] > decay:
            end = x[np.searchsorted(total, decay)]
            return float(well.centre + side * end)
        reach *= 1.35
    raise SpectrumError(f"wave functions at energy {energy:.6g} do not end: the potential does not confine there")
