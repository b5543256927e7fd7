"""Which primary observables a set of measurements needs, and in which columns of a chain's ledgers they stand."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.circles import phase_of
from quarterturn.actions.expression import Expression, apply
from quarterturn.actions.model import Bracket, EuclideanAction, Measurement
from quarterturn.actions.printing import notation
from quarterturn.compiled.field_observables import AVERAGED, LOWEST_MODE, ZERO_MODE
from quarterturn.compiled.observables import Observables, lattice_offsets
from quarterturn.compiled.target import Target

NOW = Fraction(0)


@dataclass(frozen=True)
class Layout:
    """Brackets without repetition, numbers before curves, and where to find each."""

    fixed: tuple[Bracket, ...]
    free: tuple[Bracket, ...]
    steps: int  # points of a curve in time
    is_complex: bool  # column 0 is then the phase
    directions: tuple[int, ...] = ()  # of fields: along which direction each curve runs; in time where there are none
    lengths: tuple[int, ...] = ()  # of fields: points of each curve

    def number(self, bracket: Bracket) -> int:
        """Column of a fixed bracket, in the ledger of numbers and at the head of the ledger of curves."""
        return _place(self.fixed, bracket) + self.is_complex

    def curve(self, bracket: Bracket) -> NDArray[np.int_]:
        """Columns of a free bracket in the ledger of curves, (points,)."""
        place, lengths = _place(self.free, bracket), self.points
        first = len(self.fixed) + self.is_complex + sum(lengths[:place])
        return np.arange(first, first + lengths[place])

    def direction(self, bracket: Bracket) -> int:
        """Along which direction a free bracket runs, 0 for time."""
        return self.directions[_place(self.free, bracket)] if self.directions else 0

    @property
    def points(self) -> tuple[int, ...]:
        """Points of each curve."""
        return self.lengths or (self.steps,) * len(self.free)

    @property
    def number_names(self) -> tuple[str, ...]:
        phase = ("average phase",) if self.is_complex else ()
        return (*phase, *(b.label for b in self.fixed))

    @property
    def curve_names(self) -> tuple[str, ...]:
        steps = [
            f"{b.label} at step {n}" for b, count in zip(self.free, self.points, strict=True) for n in range(count)
        ]
        return (*self.number_names, *steps)


def _place(brackets: tuple[Bracket, ...], wanted: Bracket) -> int:
    """Position of the bracket of the same meaning; labels do not count."""
    return next(i for i, b in enumerate(brackets) if _meaning(b) == _meaning(wanted))


def _meaning(bracket: Bracket) -> tuple:
    return bracket.groups, bracket.over, bracket.places


def pair_bracket(left: Expression, right: Expression, label: str, dimension: int = 1) -> Bracket:
    """<left(t) right(0)>, of fields with left averaged over space: at zero momentum."""
    space = dimension - 1
    places = ((AVERAGED,) * space, (NOW,) * space) if space else ()
    return Bracket(label, ((None, left), (NOW, right)), places=places)


def mode_brackets(measurement: Measurement) -> tuple[Bracket, Bracket]:
    """The powers of the zero mode and of the longest waves of xi2's operator."""
    (f,) = measurement.operators
    zero, lowest = (Bracket(f"{measurement.label}: {kind}", ((NOW, f),), kind) for kind in (ZERO_MODE, LOWEST_MODE))
    return zero, lowest


def gap_brackets(measurement: Measurement, dimension: int = 1) -> tuple[list[list[Bracket]], list[Bracket]]:
    """The correlation matrix of a gap's operators and their expectation values."""
    operators = measurement.operators
    matrix = [
        [pair_bracket(f, g, f"{measurement.label}: C[{i + 1},{j + 1}](t)", dimension) for j, g in enumerate(operators)]
        for i, f in enumerate(operators)
    ]
    for i in range(len(operators)):
        for j in range(i):
            matrix[i][j] = matrix[j][i]
    means = [Bracket(f"{measurement.label}: <O{i + 1}>", ((NOW, f),)) for i, f in enumerate(operators)]
    return matrix, means


def lay_out(measurements: Sequence[Measurement], euclidean: EuclideanAction, sites: int) -> Layout:
    """Collect the brackets of all measurements. Labels do not tell brackets apart, their meaning does."""
    fixed: dict[tuple, Bracket] = {}
    free: dict[tuple, Bracket] = {}
    for measurement in measurements:
        brackets = list(measurement.brackets)
        if measurement.kind == "xi2":
            brackets = list(mode_brackets(measurement))
        if measurement.kind == "gap":
            matrix, means = gap_brackets(measurement, euclidean.dimension)
            brackets = [*(b for row in matrix for b in row), *means]
        for bracket in brackets:
            (free if bracket.free else fixed).setdefault(_meaning(bracket), bracket)
    is_complex = any(a.terms for a in euclidean.drift)
    if not fixed and not is_complex:  # curves alone: something has to tell whether the chains agree
        watched = _watched(euclidean)
        fixed[_meaning(watched)] = watched
    return Layout(tuple(fixed.values()), tuple(free.values()), sites // 2 + 1, is_complex)


def _watched(euclidean: EuclideanAction) -> Bracket:
    """The mean of the first variable, or of its cosine on a circle."""
    variable, period = euclidean.variables[0], euclidean.periods[0]
    watched = Expression.of(variable) if period is None else apply("cos", phase_of(variable, period))
    return Bracket(f"<{notation(watched)}>", ((NOW, watched),))


def observables(layout: Layout, target: Target, spacing: float) -> Observables:
    """The compiled side of a layout. Raises RequestError where a time is not on the lattice."""
    offsets = tuple(lattice_offsets(b, spacing, target.sites) for b in (*layout.fixed, *layout.free))
    return Observables(target, layout.fixed, layout.free, offsets)
