"""From ledgers to estimates: each measurement's formula, with the correlated errors of its brackets.

With a complex weight every bracket is <f e^{i phi}> / <e^{i phi}>, the averages being over |exp(-S)|; where the
average phase is compatible with zero the numbers are withheld.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Expression, Symbol
from quarterturn.actions.model import Bracket, EuclideanAction, Measurement
from quarterturn.errors import EstimateError
from quarterturn.estimates.correlators import GapResult, gap
from quarterturn.estimates.curves import LinearCurve
from quarterturn.estimates.estimate import CurveEstimate, Estimate, withheld
from quarterturn.estimates.gamma import derived, estimate
from quarterturn.estimates.series import Samples
from quarterturn.runs.layout import Layout, gap_brackets, mode_brackets

Floats = NDArray[np.float64]
LOST = "the average phase is compatible with zero: the sign problem leaves no signal"
PHASE_SIGNIFICANCE = 4.0  # standard errors by which the average phase must differ from zero


def nothing(times: Floats, label: str, reason: str) -> CurveEstimate:
    """The place of a curve that the samples do not support."""
    absent = np.full(len(times), np.nan)
    return CurveEstimate(
        times, absent, absent, np.full((len(times), len(times)), np.nan), None, label, "withheld", reason
    )


@dataclass(frozen=True)
class Evaluator:
    """Evaluates measurements on the samples of one run."""

    layout: Layout
    numbers: Samples
    curves: Samples
    constants: Mapping[Atom, float]  # couplings and geometry
    euclidean: EuclideanAction
    beta: float
    spacing: float
    spacings: tuple[float, ...] = ()  # of fields: of every direction, time first

    @property
    def times(self) -> Floats:
        return np.arange(self.layout.steps, dtype=np.float64) * self.spacing

    def separations(self, measurement: Measurement) -> Floats:
        """The abscissae of a curve: times, or distances along a direction of space.

        Raises EstimateError where its brackets run along unlike directions.
        """
        free = [b for b in measurement.brackets if b.free]
        directions = {self.layout.direction(b) for b in free}
        if len(directions) > 1:
            raise EstimateError("its brackets run along different directions: measure them apart")
        points = len(self.layout.curve(free[0]))
        spacing = self.spacings[directions.pop()] if self.spacings else self.spacing
        return np.arange(points, dtype=np.float64) * spacing

    def phase(self) -> Estimate | None:
        """The average phase, or None where the weight is real."""
        return estimate(self.numbers, 0) if self.layout.is_complex else None

    def phase_is_lost(self) -> bool:
        phase = self.phase()
        return phase is not None and abs(phase.value) < PHASE_SIGNIFICANCE * (phase.error or 0.0)

    # --- numbers --------------------------------------------------------------------------------------------
    def number(self, measurement: Measurement) -> Estimate:
        """A number with its error; withheld, with the reason, where the samples can't give it."""
        if self.phase_is_lost():
            return withheld(LOST)
        columns = [self.layout.number(b) for b in measurement.brackets]
        plain = measurement.formula == Expression.of(Symbol("bracket", "0")) and not self.layout.is_complex
        try:
            if plain:
                return estimate(self.numbers, columns[0])
            function, slope = self._compose(measurement.formula, [np.array([c]) for c in columns])
            means = self.numbers.means
            width = self.numbers.values.shape[2]
            return derived(self.numbers, lambda m: float(function(m)[0]), slope(means, width)[0])
        except EstimateError as reason:
            return withheld(reason.message)

    def _compose(
        self, formula: Expression, columns: list[NDArray[np.int_]]
    ) -> tuple[Callable[[Floats], Floats], Callable[[Floats, int], Floats]]:
        """The formula as a function of the vector of means, (T,), and its gradient, (T, quantities).

        `columns` has for each bracket one column, or T columns for a curve.
        """
        points = max((len(c) for c in columns), default=1)
        columns = [np.broadcast_to(c, points) for c in columns]
        symbols = [Symbol("bracket", str(i)) for i in range(len(columns))]
        slopes = [formula.diff(symbol) for symbol in symbols]

        def lookup(means: Floats) -> dict[Atom, Floats | float]:
            scale = means[0] if self.layout.is_complex else 1.0
            return {**self.constants, **{s: means[c] / scale for s, c in zip(symbols, columns, strict=True)}}

        def function(means: Floats) -> Floats:
            with np.errstate(all="ignore"):
                return np.broadcast_to(np.real(formula.evaluate(lookup(means), np)), points)

        def gradient(means: Floats, width: int) -> Floats:
            result = np.zeros((points, width))
            values = lookup(means)
            scale = means[0] if self.layout.is_complex else 1.0
            rows = np.arange(points)
            with np.errstate(all="ignore"):
                for slope, c, symbol in zip(slopes, columns, symbols, strict=True):
                    rate = np.broadcast_to(np.real(slope.evaluate(values, np)), points)
                    np.add.at(result, (rows, c), rate / scale)
                    if self.layout.is_complex:
                        result[:, 0] -= rate * values[symbol] / scale
            return result

        return function, gradient

    # --- curves ---------------------------------------------------------------------------------------------
    def curve(self, measurement: Measurement) -> CurveEstimate:
        """A curve on the lattice's separations, 0 to half an extent."""
        try:
            times = self.separations(measurement)
        except EstimateError as reason:
            return nothing(self.times, measurement.label, reason.message)
        if self.phase_is_lost():
            return nothing(times, measurement.label, LOST)
        columns = [self.columns(b) for b in measurement.brackets]
        function, gradient = self._compose(measurement.formula, columns)
        means, width = self.curves.means, self.curves.values.shape[2]
        linear = LinearCurve(self.curves, times, function(means), gradient(means, width))
        try:
            return linear.estimate(label=measurement.label)
        except EstimateError as reason:
            return nothing(times, measurement.label, reason.message)

    def columns(self, bracket: Bracket) -> NDArray[np.int_]:
        """Columns of a bracket in the ledger of curves."""
        return self.layout.curve(bracket) if bracket.free else np.array([self.layout.number(bracket)])

    def correlation_length(self, measurement: Measurement, extent: int, spacing: float) -> Estimate:
        """xi_2 = sqrt(G(0)/G(k) - 1) / (2 sin(k/2)) with k the lowest momentum of the longest direction.

        Cooper, Freedman and Preston, Nucl. Phys. B 210 (1982) 210.
        """
        zero, lowest = (self.layout.number(b) for b in mode_brackets(measurement))

        def length(means: Floats) -> float:
            ratio = means[zero] / means[lowest] - 1
            return float(spacing * np.sqrt(ratio) / (2 * np.sin(np.pi / extent))) if ratio > 0 else float("nan")

        if self.phase_is_lost():
            return withheld(LOST)
        try:
            return derived(self.numbers, length)
        except EstimateError as reason:
            return withheld(reason.message)

    # --- gaps -----------------------------------------------------------------------------------------------
    def gap(self, measurement: Measurement) -> GapResult:
        """The lowest level that the operators create, fitted to their correlation matrix.

        Expectation values are subtracted unless a sign symmetry of the action makes them vanish.
        """
        matrix, means = gap_brackets(measurement, self.euclidean.dimension)
        indices = np.array([[self.layout.curve(b) for b in row] for row in matrix])
        if len(measurement.operators) == 1:
            indices = indices[0, 0]
        subtract = None
        if not all(is_odd(f, self.euclidean) for f in measurement.operators):
            subtract = np.array([self.layout.number(b) for b in means])
        try:
            result = gap(self.curves, indices, self.times, self.beta, subtract)
        except EstimateError as reason:
            empty = nothing(self.times, measurement.label, reason.message)
            return GapResult(withheld(reason.message), (), empty, 0.0, 0.0)
        # curves are kept as block means, so that a fit to them has no autocorrelation time in draws
        return replace(result, estimate=replace(result.estimate, tau=None, tau_error=None, n_eff=None))


def is_odd(expression: Expression, euclidean: EuclideanAction) -> bool:
    """Whether a sign symmetry of the action reverses the expression, so that its expectation value vanishes."""
    for signs in euclidean.symmetries:
        sign: dict[Atom, int] = dict(zip(euclidean.variables, signs, strict=True))
        turned = expression.substitute(lambda atom: _signed(atom, sign))  # noqa: B023 - used at once
        if turned == -expression:
            return True
    return False


def _signed(atom: Atom, sign: Mapping[Atom, int]) -> Expression | None:
    return Expression.of(atom).scaled(sign[atom]) if atom in sign else None
