"""A basis that fits: frames (a box or a circle, and a number of points), enlarged where wave functions touch them.

What a frame lacks is read off the wave functions themselves: their size at the ends of the box, and their share of the
fastest waves of the basis. Both enter energies squared.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Basis, Circle, Interval, Numbers
from quarterturn.imaginary.landscape import Landscape
from quarterturn.imaginary.problem import OnePath

Floats = NDArray[np.float64]
DECAY = 20.0  # exponent by which wave functions fall towards the ends of the first frame
MARGIN = 1.04  # on the fastest momentum
TAIL = 3e-8  # size of a wave function at an end, relative to its largest, that counts as nothing
GROWTH = 1.5  # largest enlargement at once
ATTEMPTS = 14
STALLED = 0.1  # less gain than this from an enlargement: the potential is rough
MOST_POINTS = 1400

# exponent (in units of half the product of the two radii) by which an oscillator falls between radius 1 and u
_RADII = np.concatenate([1 + np.logspace(-6, 0, 200), np.logspace(0.31, 6, 200)])
_EXPONENTS = _RADII * np.sqrt(_RADII**2 - 1) - np.arccosh(_RADII)


@dataclass(frozen=True)
class Tails:
    """Relative sizes of wave functions at the left and right end, and in the fastest waves."""

    left: float
    right: float
    fast: float

    @property
    def largest(self) -> float:
        return max(self.left, self.right, self.fast)


@dataclass(frozen=True)
class LineFrame:
    """A box with `points` functions. Ends at walls stay where they are; an even problem keeps a symmetric box."""

    problem: OnePath
    low: float
    high: float
    points: int
    centre: float  # of the region in which wave functions live: what the ends move away from
    walls: tuple[bool, bool] = (False, False)

    @cached_property
    def basis(self) -> Basis:
        return Interval(self.low, self.high, self.points)

    @property
    def mirrored(self) -> bool:
        return self.problem.even and self.low == -self.high

    def tails(self, vectors: Numbers) -> Tails:
        """Of the columns of `vectors`."""
        size = np.abs(vectors)
        largest = size.max(axis=0)
        left, right = ((size[part].max(axis=0) / largest).max() for part in (slice(0, 2), slice(-2, None)))
        fast = (np.abs(self.basis.fastest @ vectors).max(axis=0) / largest).max()
        return Tails(0.0 if self.walls[0] else float(left), 0.0 if self.walls[1] else float(right), float(fast))

    def enlarged(self, tails: Tails) -> LineFrame:
        """Wider and finer where `tails` are too large, by as much as Gaussian tails need."""
        return self._scaled(_growth(tails.left), _growth(tails.right), _growth(tails.fast))

    def smaller(self) -> LineFrame:
        """Narrower and coarser by a few per cent: a second opinion."""
        return self._scaled(0.965, 0.965, 0.965)

    def finer(self, ratio: float) -> LineFrame:
        return replace(self, points=math.ceil(self.points * ratio))

    def widened(self) -> LineFrame:
        """By one step at each end, so that the last grid points lie where the ends were."""
        step = (self.high - self.low) / (self.points + 1)
        low, high = (0.0 if wall else step for wall in self.walls)
        return replace(self, low=self.low - low, high=self.high + high, points=self.points + (low > 0) + (high > 0))

    def _scaled(self, left: float, right: float, density: float) -> LineFrame:
        if self.mirrored:
            left = right = max(left, right)
        low = self.low if self.walls[0] else self.centre - left * (self.centre - self.low)
        high = self.high if self.walls[1] else self.centre + right * (self.high - self.centre)
        points = math.ceil(self.points * density * (high - low) / (self.high - self.low))
        return replace(self, low=low, high=high, points=points)


@dataclass(frozen=True)
class CircleFrame:
    """A circle with `points` plane waves."""

    problem: OnePath
    points: int

    @cached_property
    def basis(self) -> Basis:
        assert self.problem.period is not None
        return Circle(self.problem.period, self.points | 1, self.problem.flux)

    @property
    def mirrored(self) -> bool:
        return self.problem.even and self.problem.flux == 0

    def tails(self, vectors: Numbers) -> Tails:
        size = np.abs(vectors).max(axis=0)
        return Tails(0.0, 0.0, float((np.abs(self.basis.fastest @ vectors).max(axis=0) / size).max()))

    def enlarged(self, tails: Tails) -> CircleFrame:
        return self.finer(_growth(tails.fast))

    def smaller(self) -> CircleFrame:
        return replace(self, points=max(3, (self.points | 1) - 2 * math.ceil(0.03 * self.points)))

    def finer(self, ratio: float) -> CircleFrame:
        return replace(self, points=math.ceil(self.points * ratio))


Frame = LineFrame | CircleFrame


def _growth(tail: float) -> float:
    if tail <= TAIL:
        return 1.0
    return min(max(math.sqrt(math.log(TAIL / 3) / min(math.log(tail), -1e-3)), 1.04), GROWTH)


def line_frame(landscape: Landscape, energy: float) -> LineFrame:
    """The first guess for wave functions up to `energy`."""
    problem = landscape.problem
    left, right = landscape.ends(energy, DECAY)
    low, high, centre, walls = left.q, right.q, sum(landscape.allowed(energy)) / 2, (left.wall, right.wall)
    if problem.even and not any(walls):
        low, high, centre = -max(-low, high), max(-low, high), 0.0
    height = energy - landscape.bottom
    exponent = DECAY / max(landscape.number_in_well(energy), 0.3) / _slowness(landscape, height)
    fastest = np.sqrt(2 * problem.mass * height) * radius_of(exponent) * MARGIN
    points = 4 + max(12, math.ceil((high - low) * fastest / np.pi))
    return LineFrame(problem, low, high, points, centre, walls).widened()


def _slowness(landscape: Landscape, height: float) -> float:
    """How much slower than an oscillator's wave functions fall in momentum: sin(pi/n) where V grows like q^n.

    For such V the momentum-space exponent is int |Im q| dp with q^n < 0, and n follows from the number of levels,
    which grows like E^(1/2 + 1/n).
    """
    if landscape.bottom + 2 * height >= landscape.threshold:
        return 0.8
    growth = np.log2(landscape.number(landscape.bottom + 2 * height) / landscape.number(landscape.bottom + height))
    return float(np.sin(np.pi / np.clip(1 / max(growth - 0.5, 0.01), 2.0, 8.0)))


def circle_frame(problem: OnePath, energy: float) -> CircleFrame:
    """The first guess for wave functions up to `energy`."""
    v, number, period = around(problem)
    fastest = np.sqrt(2 * problem.mass * (energy - v.min())) * radius_of(DECAY / max(number(energy), 0.3)) * MARGIN
    return CircleFrame(problem, max(11, math.ceil(fastest * period / np.pi)))


def around(problem: OnePath) -> tuple[Floats, Callable[[float], float], float]:
    """Samples of a potential on a circle, the number of levels below an energy, and the circumference.

    Raises SpectrumError where the potential is infinite or not a number.
    """
    assert problem.period is not None
    period = problem.period
    v = problem.values(np.asarray((np.arange(512) - 256) * (period / 512)))
    if not np.isfinite(v).all():
        raise SpectrumError("the potential is infinite somewhere on the circle; a wall there is a box on the line")

    def number(energy: float) -> float:
        return float(np.mean(np.sqrt(np.maximum(2 * problem.mass * (energy - v), 0.0))) * period / np.pi)

    return v, number, period


def radius_of(exponent: float) -> float:
    return float(np.interp(exponent, _EXPONENTS, _RADII))


@dataclass(frozen=True, eq=False)
class Fit:
    """A frame, the eigenvalues and eigenvectors in it, and what the wave functions that matter have at its ends."""

    frame: Frame
    values: Floats
    vectors: Numbers
    tails: Tails

    @property
    def resolved(self) -> bool:
        return self.tails.largest <= TAIL


def fit(
    frame: Frame,
    solve: Callable[[Frame], tuple[Floats, Numbers]],
    wanted: Callable[[Floats], int],
    most: int = MOST_POINTS,
) -> Fit:
    """Enlarge a frame until the first `wanted` eigenvectors fit into it, or it would have more than `most` points."""
    before = 1.0
    for _ in range(ATTEMPTS):
        values, vectors = solve(frame)
        tails = frame.tails(vectors[:, : wanted(values)])
        found = Fit(frame, values, vectors, tails)
        larger = frame.enlarged(tails)
        stalled = before < 0.01 and tails.fast > max(TAIL, STALLED * before) and max(tails.left, tails.right) <= TAIL
        if found.resolved or stalled or larger.points > most:
            break
        before, frame = (tails.fast if larger.points > 1.3 * frame.points else 1.0), larger
    return found
