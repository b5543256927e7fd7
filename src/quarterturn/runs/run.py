"""The result of a Monte Carlo run: numbers and curves by label, warnings in words, the record, and its display."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from quarterturn.actions.measurements import measurement_label
from quarterturn.actions.model import Action
from quarterturn.errors import RequestError
from quarterturn.estimates.correlators import GapResult
from quarterturn.estimates.estimate import UNRESOLVED, CurveEstimate, Estimate
from quarterturn.reports.bundle import mimebundle
from quarterturn.reports.report import Curve, Report, Row
from quarterturn.reports.text import text as render_text
from quarterturn.runs.settings import Settings
from quarterturn.runs.unit_words import level, step


@dataclass(frozen=True, eq=False)
class Run:
    """What `sample` returns: `run["<q^2>"]` is an Estimate, `run["<q(t) q(0)>"]` a curve; shows as table and plots."""

    action: Action
    settings: Settings
    numbers: Mapping[str, Estimate]
    curves: Mapping[str, CurveEstimate]
    gaps: Mapping[str, GapResult]  # the fits behind each gap, by label
    warnings: tuple[str, ...]
    facts: tuple[tuple[str, str], ...]
    stop: str  # satisfied | draws | time | interrupted
    converged: bool  # nothing unresolved or withheld, and the target error (if any) was met
    record: dict[str, Any] = field(default_factory=dict, repr=False)
    record_name: str = ""

    def __getitem__(self, label: str) -> Any:
        """The number or curve of a label, in any spelling of it; RequestError lists what there is."""
        for name in (label, measurement_label(label)):
            if name in self.numbers:
                return self.numbers[name]
            if name in self.curves:
                return self.curves[name]
        there = ", ".join([*self.numbers, *self.curves])
        raise RequestError(f"nothing was measured under {label!r}; there is {there}")

    def __iter__(self) -> Iterator[str]:
        yield from self.numbers
        yield from self.curves

    def __len__(self) -> int:
        return len(self.numbers) + len(self.curves)

    @property
    def couplings(self) -> dict[str, float]:
        return dict(self.settings.couplings)

    def report(self) -> Report:
        """Everything a person sees, as plain data."""
        latex = {m.label: m.latex for m in self.action.measurements}
        rows = tuple(_row(label, latex.get(label, ""), e) for label, e in self.numbers.items())
        curves = [_curve(c, latex.get(label, ""), "correlator") for label, c in self.curves.items()]
        for label, result in self.gaps.items():
            fitted = [f for f in result.fits if f.weight > 0.01]
            plateau = None
            if result.estimate.error and fitted:
                ends = (min(f.t_min for f in fitted), max(f.t_max for f in fitted))
                plateau = (result.estimate.value, result.estimate.error, *ends)
            effective = replace(result.curve, quantity=level(self.action), step=step(self.action))
            curves.append(_curve(effective, latex.get(label, ""), "gap", plateau, f"effective {label}"))
        return Report(
            kind="sample",
            title=f"{self.action.name}, sampled",
            action_text=self.action.canonical,
            latex=self.action.euclidean.latex,
            couplings=tuple(self.settings.couplings.items()),
            rows=rows,
            curves=tuple(c for c in curves if c.x),
            warnings=self.warnings,
            facts=self.facts,
            record_name=self.record_name,
            record=self.record,
        )

    def __repr__(self) -> str:
        return render_text(self.report())

    def _repr_mimebundle_(self, include: Any = None, exclude: Any = None) -> Any:
        return mimebundle(self.report())


def _finite(value: float | None) -> float | None:
    return None if value is None or not np.isfinite(value) else float(value)


def _row(label: str, latex: str, e: Estimate) -> Row:
    unresolved = e.state == UNRESOLVED
    return Row(
        label,
        latex,
        _finite(e.value),
        None if unresolved else _finite(e.error),
        _finite(e.exact),
        _finite(e.pull),
        None if unresolved else _finite(e.tau),
        None if unresolved else _finite(e.tau_error),
        None if unresolved else _finite(e.n_eff),
        e.state,
        e.remark,
        e.unit,
    )


def _curve(
    c: CurveEstimate,
    latex: str,
    style: str,
    plateau: tuple[float, float, float, float] | None = None,
    label: str = "",
) -> Curve:
    shown = np.isfinite(c.value) & np.isfinite(c.error)
    exact = () if c.exact is None else tuple(float(v) for v in c.exact[shown])
    return Curve(
        label or c.label,
        latex,
        f"t [{c.step.name}]" if c.step.name else "t",
        tuple(float(v) for v in c.t[shown]),
        tuple(float(v) for v in c.value[shown]),
        tuple(float(v) for v in c.error[shown]),
        exact,
        style,
        plateau,
        unit=c.unit,
    )
