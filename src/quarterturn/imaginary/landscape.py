"""Where a potential on the line is low, how many states fit below an energy, and where wave functions end.

Free of scales and deterministic: the potential is looked at on points spread over twenty decades to both sides of
zero, its lowest minima are sharpened, and the points are spread anew about each. States are counted by cells of phase
space, int sqrt(2m(E - V)) dq / pi, and wave functions end where int sqrt(2m(V - E)) dq is large (the semiclassical
formulas of any textbook; they only choose a basis, whose adequacy is tested afterwards).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.problem import OnePath

Floats = NDArray[np.float64]
DECADES = (-10.0, 10.0)
POINTS_A_DECADE = 24
MINIMA = 6  # the lowest minima that are sharpened
OVERFLOW = 1e100  # a not-a-number beyond such a height is infinity minus infinity, hence a wall
SAME = 1e-3  # relative rise over the last decade, below which a potential counts as level


@dataclass(frozen=True, eq=False)
class Landscape:
    """Samples of a potential on the line, and what follows from them."""

    problem: OnePath
    q: Floats  # (K,), ascending
    v: Floats  # (K,), +infinity behind walls
    bottom: float  # lowest value found
    centre: float  # where
    threshold: float  # the lower of the two values far away: nothing is bound above it
    level: bool  # whether the potential is level there, so that a continuum begins
    hole: float | None  # where it stops being a number, or None

    # --- counting ---------------------------------------------------------------------------------------------
    def number(self, energy: float) -> float:
        """Cells of phase space below `energy`."""
        return self._cells(slice(None), energy)

    def number_in_well(self, energy: float) -> float:
        """The same for the one classically allowed interval that holds the lowest point."""
        forbidden = np.flatnonzero(self.v >= energy)
        k = int(np.searchsorted(self.q, self.centre))
        i = int(np.searchsorted(forbidden, k))
        left = int(forbidden[i - 1]) if i > 0 else 0
        right = int(forbidden[i]) if i < len(forbidden) else len(self.q) - 1
        return self._cells(slice(left, right + 1), energy)

    def _cells(self, part: slice, energy: float) -> float:
        momentum = np.sqrt(np.maximum(energy - self.v[part], 0.0))
        return float(np.sum((momentum[1:] + momentum[:-1]) * np.diff(self.q[part])) * self._unit / (2 * np.pi))

    @property
    def _unit(self) -> float:
        return float(np.sqrt(2 * self.problem.mass))

    def energy_of(self, number: float) -> float:
        """Energy below which `number` cells of phase space lie; the threshold where there are not as many."""
        upper = self.bottom + self._first_scale()
        for _ in range(300):
            if upper >= self.threshold:
                return self.threshold
            if (found := self.number(upper)) >= number:
                break
            growth = min(max(number / max(found, 1e-3), 1.5), 4.0)
            lower, upper = upper, self.bottom + growth * (upper - self.bottom)
        else:
            raise SpectrumError("the potential is too flat for its states to be counted")
        lower = self.bottom
        for _ in range(8):
            middle = (lower + upper) / 2
            lower, upper = (middle, upper) if self.number(middle) < number else (lower, middle)
        return float(upper)

    def _first_scale(self) -> float:
        """Kinetic energy at the smallest distance from the lowest point at which it equals the rise of V."""
        distance = np.abs(self.q - self.centre)
        with np.errstate(over="ignore", invalid="ignore"):
            above = (self.v - self.bottom) * 2 * self.problem.mass * distance**2 >= 1
        if not above.any():
            raise SpectrumError("the potential is too flat to bind anything within ten decades of q")
        return float(1 / (2 * self.problem.mass * np.min(distance[above]) ** 2))

    def allowed(self, energy: float) -> tuple[float, float]:
        """The outermost samples at which a classical particle of this energy may be."""
        inside = np.flatnonzero(self.v < energy)
        return float(self.q[inside[0]]), float(self.q[inside[-1]])

    # --- ends -------------------------------------------------------------------------------------------------
    def ends(self, energy: float, decay: float) -> tuple[float, float]:
        """The interval outside which wave functions up to `energy` have fallen by exp(-decay); a wall ends it sooner.

        Raises SpectrumError where they do not fall so far, or where the potential is not a number before they have.
        """
        left = -self._end(-self.q[::-1], self.v[::-1], energy, decay, -1.0)
        return left, self._end(self.q, self.v, energy, decay, 1.0)

    def _end(self, q: Floats, v: Floats, energy: float, decay: float, side: float) -> float:
        allowed = np.flatnonzero(v < energy)
        start = int(allowed[-1])
        rate = self._unit * np.sqrt(np.maximum(v[start:] - energy, 0.0))
        with np.errstate(invalid="ignore"):
            exponent = np.concatenate([[0.0], np.cumsum((rate[1:] + rate[:-1]) / 2 * np.diff(q[start:]))])
        if not exponent[-1] >= decay:
            if self.hole is not None and side * self.hole > q[start]:
                raise SpectrumError(
                    f"the potential is not a number at q = {self.hole:.6g}, "
                    f"where wave functions of energy {energy:.6g} still reach"
                )
            raise SpectrumError(f"the potential does not confine: wave functions of energy {energy:.6g} have no end")
        k = int(np.searchsorted(exponent, decay))
        if np.isfinite(exponent[k]):
            share = (decay - exponent[k - 1]) / (exponent[k] - exponent[k - 1])
            return float(q[start + k - 1] + share * (q[start + k] - q[start + k - 1]))
        return self._wall(float(q[start + k - 1]), float(q[start + k]), side)

    def _wall(self, inside: float, outside: float, side: float) -> float:
        """Where the potential becomes infinite, to the last bit."""
        for _ in range(200):
            middle = (inside + outside) / 2
            if middle in (inside, outside):
                break
            finite = np.isfinite(self.problem.raw(np.array([side * middle]))[0])
            inside, outside = (middle, outside) if finite else (inside, middle)
        return outside

    def is_wall(self, q: float, side: float) -> bool:
        """Whether a wall stands at q, the end of an interval, towards that side."""
        beyond = self.problem.raw(np.array([q, q + side * 1e-12 * (abs(q) + 1e-300)]))
        return bool(np.isinf(beyond).any())

    # --- refinement -------------------------------------------------------------------------------------------
    def refined(self, low: float, high: float, points: int = 400) -> Landscape:
        """With more samples between low and high; the lowest point may move."""
        extra = np.linspace(low, high, points)
        return _landscape(self.problem, np.concatenate([self.q, extra]), self)


def survey(problem: OnePath) -> Landscape:
    """Look at a potential on the line.

    Raises SpectrumError where it falls without limit, is lowest far away, or is not a number at its lowest point.
    """
    first = _landscape(problem, _spread(0.0), None)
    centres = [c for c in _minima(problem, first.q, first.v) if abs(c) > 1e-9]
    if not centres:
        return first
    q = np.concatenate([first.q, *(_spread(c) for c in centres[:3])])
    return _landscape(problem, q[np.abs(q) <= first.q[-1]], first)


def _spread(centre: float) -> Floats:
    size = np.logspace(*DECADES, round(POINTS_A_DECADE * (DECADES[1] - DECADES[0])) + 1)
    return np.concatenate([centre - size[::-1], [centre], centre + size])


def _landscape(problem: OnePath, points: Floats, before: Landscape | None) -> Landscape:
    q = np.unique(points)
    q, v, hole = _without_holes(q, problem.raw(q))
    k = int(np.argmin(v))
    if before is None:
        _lowest_is_inside(q, v, k)
        threshold, level = _far_away(q, v, float(v[k]))
    else:
        threshold, level = before.threshold, before.level
    if not v[k] < threshold:
        raise SpectrumError(f"nothing is bound: far away the potential is as low as anywhere, V = {threshold:.6g}")
    return Landscape(problem, q, v, float(v[k]), float(q[k]), threshold, level, hole)


def _without_holes(q: Floats, v: Floats) -> tuple[Floats, Floats, float | None]:
    """Cut the samples where the potential stops being a number; behind an overflow it is a wall instead."""
    if not (bad := np.isnan(v)).any():
        return q, v, None
    if bad.all():
        raise SpectrumError("the potential is not a number anywhere")
    v = v.copy()
    k = int(np.nanargmin(v))
    hole = None
    low, high = 0, len(v)
    for direction in (-1, 1):
        side = np.flatnonzero(bad[k:]) + k if direction > 0 else k - np.flatnonzero(bad[k::-1])
        if not len(side):
            continue
        edge = int(side[0])
        if v[edge - direction] > OVERFLOW:
            beyond = slice(edge, None) if direction > 0 else slice(None, edge + 1)
            v[beyond] = np.inf
            continue
        hole = float(q[edge])
        if edge - direction == k:
            raise SpectrumError(f"the potential is not a number at q = {hole:.6g}, next to where it is lowest")
        low, high = (low, edge) if direction > 0 else (edge + 1, high)
    return q[low:high], v[low:high], hole


def _lowest_is_inside(q: Floats, v: Floats, k: int) -> None:
    if np.isneginf(v[k]) and not (np.isneginf(v[0]) or np.isneginf(v[-1])):
        raise SpectrumError(f"the potential is minus infinity at q = {q[k]:.6g}")
    if np.isneginf(v[k]):
        k = 0 if np.isneginf(v[0]) else len(v) - 1
    if k not in (0, len(v) - 1):
        return
    side = "infinity" if k else "minus infinity"
    inner = v[-1 - POINTS_A_DECADE] if k else v[POINTS_A_DECADE]
    if v[k] < inner - SAME * abs(inner):
        raise SpectrumError(
            f"the potential falls without limit towards q = {side}: the integral over paths diverges, nothing is bound"
        )
    raise SpectrumError(f"nothing is bound: the potential is lowest far away, V = {v[k] + 0.0:.6g} towards q = {side}")


def _far_away(q: Floats, v: Floats, bottom: float) -> tuple[float, bool]:
    """The lower of the two values at the ends, over the last two decades, and whether it is level there."""
    threshold, level = np.inf, False
    for outermost in (v[: 2 * POINTS_A_DECADE], v[-2 * POINTS_A_DECADE :][::-1]):
        end = float(np.min(outermost))
        if end <= threshold:
            threshold = end
            inner = float(np.min(outermost[POINTS_A_DECADE:]))
            level = bool(np.isfinite(outermost[0]) and outermost[0] - inner <= SAME * (outermost[0] - bottom))
    return threshold, level


def _minima(problem: OnePath, q: Floats, v: Floats) -> list[float]:
    """The lowest local minima, sharpened; lowest first."""
    inner = np.flatnonzero((v[1:-1] <= v[:-2]) & (v[1:-1] <= v[2:]) & ((v[1:-1] < v[:-2]) | (v[1:-1] < v[2:]))) + 1
    chosen = inner[np.argsort(v[inner], kind="stable")[:MINIMA]]
    if not len(chosen):
        return []
    low, high = q[chosen - 1], q[chosen + 1]
    rows = np.arange(len(chosen))
    shares = np.linspace(0.0, 1.0, 17)
    for _ in range(6):  # brackets shrink by 8^6
        x = low[:, None] + shares * (high - low)[:, None]
        y = problem.raw(x.ravel()).reshape(x.shape)
        k = np.argmin(np.where(np.isnan(y), np.inf, y), axis=1)
        low, high = x[rows, np.maximum(k - 1, 0)], x[rows, np.minimum(k + 1, 16)]
    best = np.argsort(y[rows, k], kind="stable")
    return [float(c) for c in x[rows, k][best]]
