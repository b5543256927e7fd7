"""Where a potential on the line is low, how many states fit below an energy, and where wave functions end.

Free of scales and deterministic: the potential is looked at on points spread over twenty decades to both sides of
zero, its lowest minima are sharpened, and the points are spread anew about each. States are counted by cells of phase
space, int sqrt(2m(E - V)) dq / pi, and wave functions end where int sqrt(2m(V - E)) dq is large (the semiclassical
formulas of any textbook; they only choose a basis, whose adequacy is tested afterwards).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.problem import OnePath

Floats = NDArray[np.float64]
DECADES = (-10.0, 10.0)
POINTS_A_DECADE = 16
REFINEMENT = 160  # samples in the region that wave functions fill
MINIMA = 6  # the lowest minima that are sharpened
OVERFLOW = 1e100  # a not-a-number beyond such a height is infinity minus infinity, hence a wall
FALL = 1e-3  # relative fall over the last decade, above which a potential counts as falling without limit
LEVEL = 0.05  # relative rise over the last decade, below which it counts as level


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
    @cached_property
    def _weights(self) -> Floats:
        """Of the trapezoidal rule over the samples, in units of cells of phase space."""
        widths = np.diff(self.q)
        return np.asarray(
            np.concatenate([[widths[0]], widths[1:] + widths[:-1], [widths[-1]]]) * self._unit / (2 * np.pi)
        )

    @property
    def _unit(self) -> float:
        return float(np.sqrt(2 * self.problem.mass))

    def number(self, energy: float) -> float:
        """Cells of phase space below `energy`: about as many levels."""
        return float(self._weights @ np.sqrt(np.maximum(energy - self.v, 0.0)))

    def number_in_well(self, energy: float) -> float:
        """The same for the one classically allowed interval that holds the lowest point."""
        forbidden = np.flatnonzero(self.v >= energy)
        k = int(np.searchsorted(self.q, self.centre))
        i = int(np.searchsorted(forbidden, k))
        left = int(forbidden[i - 1]) if i > 0 else 0
        right = int(forbidden[i]) if i < len(forbidden) else len(self.q) - 1
        part = slice(left, right + 1)
        return float(self._weights[part] @ np.sqrt(np.maximum(energy - self.v[part], 0.0)))

    def energy_of(self, number: float, start: float | None = None) -> float:
        """Energy below which `number` cells of phase space lie; the threshold where there are not as many.

        `start` is a guess. Raises SpectrumError where the potential is too flat.
        """
        first = self._first_scale() if start is None else start - self.bottom
        return min(energy_below(self.number, number, self.bottom, first, self.threshold), self.threshold)

    def _first_scale(self) -> float:
        """Kinetic energy at the smallest distance from the lowest point at which it equals the rise of V."""
        finite = np.isfinite(self.v)
        distance = np.abs(self.q[finite] - self.centre)
        rise = (self.v[finite] - self.bottom) * 2 * self.problem.mass
        with np.errstate(over="ignore"):
            size = np.min(distance[rise * distance**2 >= 1], initial=np.max(distance))
        return float(1 / (2 * self.problem.mass * size**2))

    def allowed(self, energy: float) -> tuple[float, float]:
        """The outermost samples at which a classical particle of this energy may be."""
        inside = np.flatnonzero(self.v < energy)
        return float(self.q[inside[0]]), float(self.q[inside[-1]])

    # --- ends -------------------------------------------------------------------------------------------------
    def ends(self, energy: float, decay: float) -> tuple[End, End]:
        """Where, to both sides, wave functions up to `energy` have fallen by exp(-decay); a wall ends them sooner.

        Raises SpectrumError where they do not fall so far, or where the potential is not a number before they have.
        """
        inside = np.flatnonzero(self.v < energy)
        first, last = int(inside[0]) + 1, int(inside[-1])
        left = self._end(-self.q[:first][::-1], self.v[:first][::-1], energy, decay, -1.0)
        return End(-left.q, left.wall), self._end(self.q[last:], self.v[last:], energy, decay, 1.0)

    def _end(self, q: Floats, v: Floats, energy: float, decay: float, side: float) -> End:
        rate = self._unit * np.sqrt(np.maximum(v - energy, 0.0))
        with np.errstate(invalid="ignore"):
            exponent = np.cumsum((rate[1:] + rate[:-1]) / 2 * (q[1:] - q[:-1]))
        if not (len(exponent) and exponent[-1] >= decay):
            if self.hole is not None and side * self.hole > q[0]:
                raise SpectrumError(
                    f"the potential is not a number at q = {self.hole:.6g}, "
                    f"where wave functions of energy {energy:.6g} still reach"
                )
            raise SpectrumError(f"the potential does not confine: wave functions of energy {energy:.6g} have no end")
        k = int(np.searchsorted(exponent, decay))
        if np.isinf(exponent[k]):
            return End(self._wall(float(q[k]), float(q[k + 1]), side), True)
        before = exponent[k - 1] if k else 0.0
        return End(float(q[k] + (decay - before) / (exponent[k] - before) * (q[k + 1] - q[k])), False)

    def _wall(self, inside: float, outside: float, side: float) -> float:
        """Where the potential becomes infinite, to the last bit."""
        for _ in range(1100):
            middle = (inside + outside) / 2
            if middle in (inside, outside):
                break
            finite = np.isfinite(self.problem.raw(np.array([side * middle]))[0])
            inside, outside = (middle, outside) if finite else (inside, middle)
        return outside

    def refined(self, energy: float) -> Landscape:
        """With more samples where a classical particle of this energy may be; the lowest point may move."""
        low, high = self.allowed(energy)
        low, high = max(low - (high - low) / 2, self.q[0]), min(high + (high - low) / 2, self.q[-1])
        return _landscape(self.problem, *_with(self, np.linspace(low, high, REFINEMENT)), self)


@dataclass(frozen=True)
class End:
    """Where wave functions end, and whether a wall ends them."""

    q: float
    wall: bool


def energy_below(
    number: Callable[[float], float], target: float, bottom: float, first: float, highest: float = np.inf
) -> float:
    """Energy at which `number`, which grows with energy, is `target` to some per cent from above, or `highest`.

    The search begins at `first` above `bottom`. Raises SpectrumError where 300 steps by up to a factor 4 lead nowhere.
    """
    height, below, above = first, 0.0, np.inf
    for _ in range(300):
        found = number(bottom + height)
        if found >= target:
            above = height
        else:
            below = height
            if bottom + height >= highest:
                return highest
        if above < np.inf and below > 0.93 * above:
            return bottom + above
        factor = min(max(target / max(found, 1e-3), 0.25), 4.0) * 1.02
        guess = height * factor
        height = guess if below < guess < above else (below + above) / 2
    raise SpectrumError("the potential is too flat for its levels to be counted")


def survey(problem: OnePath) -> Landscape:
    """Look at a potential on the line.

    Raises SpectrumError where it falls without limit, is lowest far away, or is not a number at its lowest point.
    """
    q = _spread(0.0)
    first = _landscape(problem, q, problem.raw(q), None)
    if not (centres := _minima(problem, first.q, first.v)):
        return first
    extra = np.concatenate([_spread(c) for c in centres[:3]])
    return _landscape(problem, *_with(first, extra[(extra > first.q[0]) & (extra < first.q[-1])]), first)


def _spread(centre: float) -> Floats:
    size = np.logspace(*DECADES, round(POINTS_A_DECADE * (DECADES[1] - DECADES[0])) + 1)
    return np.concatenate([centre - size[::-1], [centre], centre + size])


def _with(landscape: Landscape, extra: Floats) -> tuple[Floats, Floats]:
    """Its samples and those at `extra` points."""
    q = np.concatenate([landscape.q, extra])
    v = np.concatenate([landscape.v, landscape.problem.raw(extra)])
    order = np.argsort(q, kind="stable")
    q, v = q[order], v[order]
    new = np.concatenate([[True], q[1:] > q[:-1]])
    return q[new], v[new]


def _landscape(problem: OnePath, q: Floats, v: Floats, before: Landscape | None) -> Landscape:
    q, v, hole = _without_holes(q, v)
    k = int(np.argmin(v))
    if before is None:
        _lowest_is_inside(q, v, k)
        threshold, level = _far_away(v, float(v[k]))
    else:
        threshold, level, hole = before.threshold, before.level, before.hole if hole is None else hole
    if not v[k] < threshold:
        raise SpectrumError(f"nothing is bound: far away the potential is as low as anywhere, V = {threshold:.6g}")
    return Landscape(problem, q, v, float(v[k]), float(q[k]), threshold, level, hole)


def _without_holes(q: Floats, v: Floats) -> tuple[Floats, Floats, float | None]:
    """Cut the samples where the potential stops being a number; behind an overflow it is a wall instead."""
    if not (bad := np.isnan(v)).any():
        return q, v, None
    if bad.all():
        raise SpectrumError("the potential is not a number anywhere")
    v, k = v.copy(), int(np.nanargmin(v))
    low, high, hole = 0, len(v), None
    for step, side in ((-1, k - np.flatnonzero(bad[k::-1])), (1, k + np.flatnonzero(bad[k:]))):
        if not len(side):
            continue
        edge = int(side[0])
        if v[edge - step] > OVERFLOW:
            v[edge::step] = np.inf
        elif edge - step == k:
            raise SpectrumError(f"the potential is not a number at q = {q[edge]:.6g}, next to where it is lowest")
        else:
            hole, low, high = float(q[edge]), *((low, edge) if step > 0 else (edge + 1, high))
    return q[low:high], v[low:high], hole


def _lowest_is_inside(q: Floats, v: Floats, k: int) -> None:
    if np.isneginf(v[k]) and not (np.isneginf(v[0]) or np.isneginf(v[-1])):
        raise SpectrumError(f"the potential is minus infinity at q = {q[k]:.6g}")
    if np.isneginf(v[k]):
        k = 0 if np.isneginf(v[0]) else len(v) - 1
    if np.isposinf(v[k]):
        raise SpectrumError("the potential is infinite everywhere")
    if np.all(v == v[k]):
        raise SpectrumError("the potential is flat: nothing is bound")
    if k not in (0, len(v) - 1):
        return
    side = "infinity" if k else "minus infinity"
    inner = v[-1 - POINTS_A_DECADE] if k else v[POINTS_A_DECADE]
    if np.isneginf(v[k]) or v[k] < inner - FALL * abs(inner):
        raise SpectrumError(
            f"the potential falls without limit towards q = {side}: the integral over paths diverges, nothing is bound"
        )
    raise SpectrumError(f"nothing is bound: the potential is lowest far away, V = {v[k] + 0.0:.6g} towards q = {side}")


def _far_away(v: Floats, bottom: float) -> tuple[float, bool]:
    """The lower of the lowest values over the last two decades to both sides, and whether it is level there."""
    sides = (v[: 2 * POINTS_A_DECADE], v[-2 * POINTS_A_DECADE :][::-1])
    lowest = min(sides, key=lambda side: float(np.min(side)))
    outer, inner = np.max(lowest[:POINTS_A_DECADE]), np.max(lowest[POINTS_A_DECADE:])
    level = np.isfinite(outer) and outer - inner <= LEVEL * (inner - bottom)
    return float(np.min(lowest)), bool(level)


def _minima(problem: OnePath, q: Floats, v: Floats) -> list[float]:
    """The lowest local minima, sharpened; lowest first."""
    inner = np.flatnonzero((v[1:-1] <= v[:-2]) & (v[1:-1] <= v[2:]) & ((v[1:-1] < v[:-2]) | (v[1:-1] < v[2:]))) + 1
    inner = inner[q[inner + 1] - q[inner - 1] > 4 * 10 ** DECADES[0]]  # the one at 0 is sharp enough
    if not len(inner):
        return []
    chosen = inner[np.argsort(v[inner], kind="stable")[:MINIMA]]
    low, high, rows = q[chosen - 1], q[chosen + 1], np.arange(len(chosen))
    shares = np.linspace(0.0, 1.0, 17)
    for _ in range(6):  # brackets shrink by 8^6
        x = low[:, None] + shares * (high - low)[:, None]
        y = problem.raw(x.ravel()).reshape(x.shape)
        k = np.argmin(np.where(np.isnan(y), np.inf, y), axis=1)
        low, high = x[rows, np.maximum(k - 1, 0)], x[rows, np.minimum(k + 1, 16)]
    best = np.argsort(y[rows, k], kind="stable")
    return [float(c) for c in x[rows, k][best]]
