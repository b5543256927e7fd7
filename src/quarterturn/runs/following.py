"""What follows from a spectrum, as things that show themselves: thermodynamics, kernels, lines, real time, response."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.model import Action
from quarterturn.errors import RequestError
from quarterturn.imaginary.fixed_ends import FixedEnds
from quarterturn.imaginary.lines import Lines
from quarterturn.imaginary.rotation import OnTheArc
from quarterturn.imaginary.thermodynamics import Thermodynamics
from quarterturn.reports.report import Curve, Report, Row
from quarterturn.runs.shown import Shown
from quarterturn.runs.unit_words import along, facts, level

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
MOST_LINES = 12  # of a report
VACUUM_TURN = (
    "t stands for t (1 - i eps), eps -> 0+: each frequency is E_n - E_0 - i eps, which is the quarter turn back from "
    "imaginary time; factors are ordered by time, the later to the left"
)
THERMAL_TURN = "real times in a thermal average; no i eps is needed; factors are ordered by time, the later to the left"


@dataclass(frozen=True)
class Context:
    """The action and the couplings that a result belongs to, for its report."""

    name: str
    action_text: str
    latex: str
    couplings: tuple[tuple[str, float], ...]
    beta: float | None
    units: tuple[tuple[str, str], ...] = ()  # facts about them
    time: str = "t"  # the axis of imaginary or real time, with its unit
    energy: str = ""  # unit

    @staticmethod
    def of(action: Action, couplings: Mapping[str, float], beta: float | None) -> Context:
        """The context of results of an action at these couplings."""
        euclidean = action.euclidean
        return Context(
            action.name,
            action.canonical,
            euclidean.latex,
            tuple(couplings.items()),
            beta,
            facts(action),
            along(action),
            level(action).name,
        )

    @property
    def where(self) -> tuple[str, str]:
        """The fact that says which averages are meant."""
        return "averages", "in the vacuum" if self.beta is None else f"thermal, beta = {self.beta:g}"

    def report(self, title: str, rows: list[Row], curves: list[Curve], lines: list[tuple[str, str]]) -> Report:
        return Report(
            kind="levels", title=f"{self.name}, {title}", action_text=self.action_text, latex=self.latex,
            couplings=self.couplings, rows=tuple(rows), curves=tuple(curves), facts=(*lines, *self.units),
        )  # fmt: skip


def _curve(label: str, x_label: str, x: Floats, y: Floats) -> Curve:
    return Curve(label, "", x_label, tuple(map(float, x)), tuple(map(float, y)))


@dataclass(frozen=True, eq=False, repr=False)
class ThermodynamicsTable(Shown):
    """Z, F, E, S and C: numbers for one beta, arrays, (B,), for several."""

    context: Context
    functions: Thermodynamics

    @property
    def beta(self) -> Floats:
        return self.functions.beta

    def _errors(self) -> tuple[float, ...]:
        """What wrong levels do to Z, F, E, S, C at the first beta, each level by its own error; first order."""
        f, error = self.functions, self.functions.energy_error + 1e-15 * float(abs(self.functions.energy[0]))
        shift, spread = float(f.beta[0]) * error, 1 + float(np.sqrt(f.heat_capacity[0]))
        return shift * float(f.partition[0]), error, 2 * error * spread, shift * spread, 4 * shift * spread

    def __getattr__(self, name: str) -> Any:
        if name in ("partition", "free_energy", "energy", "entropy", "heat_capacity"):
            column = getattr(self.functions, name)
            return float(column[0]) if len(column) == 1 else column
        raise AttributeError(name)

    def report(self) -> Report:
        f = self.functions
        named = (
            ("Z", f.partition), ("F = -ln Z / beta", f.free_energy), ("E = <H>", f.energy),
            ("S = beta (E - F)", f.entropy), ("C = beta^2 (<H^2> - <H>^2)", f.heat_capacity),
        )  # fmt: skip
        if len(f.beta) == 1:
            errors = self._errors()
            units = ("", self.context.energy, self.context.energy, "", "")
            columns = zip(named, errors, units, strict=True)
            rows = [Row(label, "", float(c[0]), e, unit=unit) for (label, c), e, unit in columns]
            return self.context.report(f"thermodynamics at beta = {f.beta[0]:g}", rows, [], [])
        curves = [_curve(label, "beta", f.beta, column) for label, column in named[1:]]
        return self.context.report("thermodynamics", [], curves, [])


@dataclass(frozen=True, eq=False, repr=False)
class Kernel(Shown):
    """K(q_b, beta; q_a, 0) from the levels, and again by split operators."""

    context: Context
    q_b: tuple[float, ...]  # one number for each degree of freedom
    q_a: tuple[float, ...]
    beta: float
    levels: FixedEnds
    propagation: FixedEnds

    @property
    def value(self) -> float | complex:
        """The sum over levels."""
        return self.levels.value

    @property
    def error(self) -> float:
        return self.levels.error

    @property
    def agreement(self) -> float:
        """The difference of the two over the sum of their errors."""
        return abs(self.levels.value - self.propagation.value) / (self.levels.error + self.propagation.error)

    def report(self) -> Report:
        rows = []
        for how, found in (("levels", self.levels), ("propagation", self.propagation)):
            if isinstance(found.value, complex):
                rows.append(Row(f"Re K, {how}", "", found.value.real, found.error))
                rows.append(Row(f"Im K, {how}", "", found.value.imag, found.error))
            else:
                rows.append(Row(f"K, {how}", "", found.value, found.error))
        order = self.propagation.order
        said = [
            (
                "propagation",
                f"fourth order with positive coefficients, {self.propagation.steps[-1]} steps",
            ),
            ("measured order", "not measured: rounding hides it" if order is None else f"{order:.2f}"),
            ("agreement", f"the two differ by {self.agreement:.2g} of their errors"),
        ]
        a, b = (", ".join(f"{x:g}" for x in end) for end in (self.q_a, self.q_b))
        title = f"propagator from ({a}) to ({b}) in imaginary time {self.beta:g}"
        return self.context.report(title, rows, [], said)


@dataclass(frozen=True, eq=False, repr=False)
class SpectralLines(Shown):
    """The lines of <f(t) g(0)>: frequencies [energy] and weights, S(w) = sum weight delta(w - frequency)."""

    context: Context
    label: str
    lines: Lines

    @property
    def frequencies(self) -> Floats:
        return self.lines.frequencies

    @property
    def weights(self) -> NDArray[Any]:
        return self.lines.weights

    @property
    def commutator(self) -> tuple[Floats, NDArray[Any]]:
        """Lines of the commutator <[f(t), g(0)]>: what a response sees."""
        return self.lines.commutator

    def moment(self, k: int) -> float:
        """sum weight frequency^k: for k = 0 the equal-time product, for k = 1 the f-sum rule."""
        return float(np.real(np.sum(self.weights * self.frequencies**k)))

    def broadened(self, omega: Floats, width: float) -> Floats:
        """S(w) with each line a Gaussian of standard deviation `width`, (W,)."""
        if not width > 0:
            raise RequestError(f"width must be positive, got {width:g}")
        x = (np.asarray(omega, dtype=np.float64)[:, None] - self.frequencies[None, :]) / width
        return np.asarray(np.exp(-(x**2) / 2) @ np.real(self.weights) / (width * np.sqrt(2 * np.pi)))

    def report(self) -> Report:
        heaviest = np.argsort(-np.abs(self.weights), kind="stable")[:MOST_LINES]
        heavy = np.sort(heaviest[np.abs(self.weights[heaviest]) > self.lines.uncertain])
        rows = [
            Row(f"weight at {self.frequencies[i]:.10g}", "", float(np.real(self.weights[i])), self.lines.uncertain)
            for i in heavy
        ]
        said = [
            self.context.where,
            ("meaning", f"{self.label} = sum of weight exp(-i frequency t), operators as written"),
            ("sum of weights", f"{self.moment(0):.10g}, the product at equal times"),
            ("first moment", f"{self.moment(1):.10g}"),
            ("unsure", f"weight {self.lines.uncertain:.1g} at most belongs to states that are not converged"),
        ]
        if not rows:
            said.insert(1, ("lines", "none: no weight stands out of what is unsure"))
        shown = self.frequencies[heavy]
        if len(shown) > 1:
            spread = float(np.ptp(shown))
            omega = np.linspace(shown.min() - 0.1 * spread, shown.max() + 0.1 * spread, 201)
            curve = _curve(f"S(w), lines widened to {spread / 40:.2g}", "w", omega, self.broadened(omega, spread / 40))
            return self.context.report(f"spectral lines of {self.label}", rows, [curve], said)
        return self.context.report(f"spectral lines of {self.label}", rows, [], said)


@dataclass(frozen=True, eq=False, repr=False)
class RealTime(Shown):
    """A correlator at real times: `t`, `value` (complex) and `error`, an estimate for the longest time."""

    context: Context
    label: str
    t: Floats
    value: Complexes
    error: float
    turn: tuple[OnTheArc, ...] = ()  # the rotation from imaginary to real time, made twice

    @property
    def prescription(self) -> str:
        return VACUUM_TURN if self.context.beta is None else THERMAL_TURN

    def report(self) -> Report:
        curves = [
            _curve(f"Re {self.label}", self.context.time, self.t, self.value.real),
            _curve(f"Im {self.label}", self.context.time, self.t, self.value.imag),
        ]
        said = [
            self.context.where,
            ("i epsilon", self.prescription),
            ("error", f"about {self.error:.1g} at the longest time"),
        ]
        if self.turn:
            angles = ", ".join(f"{np.degrees(a.angle):.0f}" for a in self.turn)
            worst = max(a.difference for a in self.turn)
            said.append((
                "quarter turn",
                f"the correlator at {self.turn[0].t:.3g} exp(i angle), turned from imaginary (0) to real time (90) "
                f"through {angles} degrees: the sum over levels and split-operator propagation differ by {worst:.1g}",
            ))  # fmt: skip
        return self.context.report(f"{self.label} in real time", [], curves, said)


@dataclass(frozen=True, eq=False, repr=False)
class Response(Shown):
    """Linear response of <f> to a source that couples as H - J(t) g.

    `values` is chi(w + i width) at `frequencies`; its imaginary part is what is absorbed.
    """

    context: Context
    label: str
    frequencies: Floats
    width: float
    lines: Lines

    @cached_property
    def values(self) -> Complexes:
        return self.lines.susceptibility(np.asarray(self.frequencies + 1j * self.width, dtype=np.complex128))

    @property
    def static(self) -> float:
        """d<f>/dJ for a constant source in equilibrium (isothermal)."""
        return self.lines.static

    def in_time(self, t: Any) -> Floats:
        """chi(t) = i <[f(t), g(0)]> for t >= 0, zero before: the change of <f> after a kick J = delta(t), (T,)."""
        return self.lines.response_in_time(np.atleast_1d(np.asarray(t, dtype=np.float64)))

    def to(self, t: Any, source: Any) -> Floats:
        """Change of <f(t)>, to first order, under a source J given at ascending times t, (T,); zero before."""
        times, j = (np.asarray(x, dtype=np.float64) for x in (t, source))
        if times.ndim != 1 or times.shape != j.shape or len(times) < 2 or not np.all(np.diff(times) > 0):
            raise RequestError("a source is given as values at ascending times: two lists of equal length")
        return self.lines.driven(times, j)

    def report(self) -> Report:
        curves = [
            _curve("Re chi", "w", self.frequencies, self.values.real),
            _curve("Im chi", "w", self.frequencies, self.values.imag),
        ]
        said = [
            self.context.where,
            ("meaning", "change of <f> over J for H - J g: chi(w) = int_0^inf dt exp(i w t) i <[f(t), g(0)]>"),
            ("i epsilon", f"retarded: w stands for w + i {self.width:.3g}"),
        ]
        rows = [Row("chi static", "", self.static)]
        return self.context.report(f"response {self.label}", rows, curves, said)
