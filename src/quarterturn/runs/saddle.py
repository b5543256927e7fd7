"""`saddle`: instantons and bounces of a declared action, and what they give at one loop."""

from __future__ import annotations

import time
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Expression
from quarterturn.actions.findings import check
from quarterturn.actions.model import Action
from quarterturn.actions.printing import notation
from quarterturn.errors import ActionError, RequestError, SaddleError
from quarterturn.records.canonical import record_name
from quarterturn.records.schema import validate
from quarterturn.reports.bundle import mimebundle
from quarterturn.reports.report import Curve, Report, Row
from quarterturn.reports.text import text as render_text
from quarterturn.runs.bubble import field_saddle
from quarterturn.runs.recording import base_record, with_unit
from quarterturn.runs.settings import Settings, split
from quarterturn.runs.unit_words import facts as unit_facts
from quarterturn.runs.unit_words import of_saddle
from quarterturn.saddles.landscape import Landscape, survey
from quarterturn.saddles.problem import Problem, paths_problem
from quarterturn.saddles.rates import crossover, decay_rate, doubts, tunnelling_rates
from quarterturn.saddles.saddle import Saddle
from quarterturn.saddles.search import chosen, equivalents, escape, tunnelling
from quarterturn.units.number import Number
from quarterturn.units.quantity import Quantity

Floats = NDArray[np.float64]
KINDS = ("instanton", "bounce")
DRAWN = 201  # points of a curve
MARGIN = 0.3  # of the extent of the path, that the potential is drawn beyond it


@dataclass(frozen=True, eq=False)
class Saddles:
    """What `saddle` returns: the dominant stationary path, and numbers that follow from it by their labels.

    `t`, (K,), and `path`, (number of paths, K), hold it as far as it moves; of a field `t` is the radius.
    """

    action: Action
    couplings: Mapping[str, float]
    kind: str  # instanton | bounce | thermal bounce | static | field bounce
    t: Floats
    path: Floats
    rows: tuple[Row, ...]
    curves: tuple[Curve, ...]
    warnings: tuple[str, ...]
    facts: tuple[tuple[str, str], ...]
    record: dict[str, Any] = field(default_factory=dict, repr=False)
    record_name: str = ""

    def __getitem__(self, label: str) -> Number | None:
        """A number by its label, None where it is withheld. RequestError lists what there is."""
        for row in self.rows:
            if row.label == label:
                return None if row.value is None else Number(row.value, self.quantity(label))
        raise RequestError(f"there is no {label!r} here; there is {', '.join(self)}")

    def quantity(self, label: str) -> Quantity:
        """What the number of a label counts."""
        zero_modes = next((row.value for row in self.rows if row.label == "zero modes"), None)
        return of_saddle(self.action, label, zero_modes or 0)

    def __iter__(self) -> Iterator[str]:
        return (row.label for row in self.rows)

    def __len__(self) -> int:
        return len(self.rows)

    def report(self) -> Report:
        """Everything a person sees, as plain data."""
        return Report(
            kind="saddle",
            title=f"{self.action.name}, {self.kind}",
            action_text=self.action.canonical,
            latex=self.action.euclidean.latex,
            couplings=tuple(self.couplings.items()),
            rows=tuple(replace(row, unit=self.quantity(row.label).name) for row in self.rows),
            curves=self.curves,
            warnings=self.warnings,
            facts=(*self.facts, *unit_facts(self.action)),
            record_name=self.record_name,
            record=self.record,
        )

    def __repr__(self) -> str:
        return render_text(self.report())

    def _repr_mimebundle_(self, include: Any = None, exclude: Any = None) -> Any:
        return mimebundle(self.report())


def saddle(
    action: Action,
    *,
    vacuum: float | Sequence[float] | None = None,
    kind: str | None = None,
    **keywords: float,
) -> Saddles:
    """The dominant instanton or bounce of an action, with its fluctuations and its one-loop rate.

    Parameters ---------- action From `quarterturn.action`: up to four paths, or one real scalar field in D = 2 to 4.
    Its potential need not be bounded below. vacuum The path starts from the minimum next to this point; a sequence of
    numbers for several paths. By default from the lowest minimum where another is level with it, else from the one
    that is not the lowest. kind "instanton" or "bounce", where an action has both; by default an instanton where
    minima are level. **keywords Couplings; `beta` for periodic bounces at that inverse temperature.

    Returns
    -------
    Saddles
        Action, duration, zero and negative modes, determinant, and splitting or rate, each with its numerical error;
        the corrections to one loop are not in these errors.

    Raises
    ------
    RequestError, ActionError
        As `levels`; that the potential falls without limit is no obstacle here.
    SaddleError
        No second minimum, no barrier, a continuous family of saddles, or more degrees of freedom than are handled.
    """
    begun = time.perf_counter()
    couplings, lattice = split(action, keywords)
    beta = lattice.pop("beta", None)
    if lattice:
        raise RequestError(f"{next(iter(lattice))} has no meaning for a saddle, which is solved for in the continuum")
    if beta is not None and not beta > 0:
        raise RequestError(f"beta must be positive, got {beta:g}")
    if kind not in (None, *KINDS):
        raise RequestError(f"kind must be instanton or bounce, or absent, got {kind!r}")
    _examined(action, couplings)
    start = _start(action, vacuum)
    if len(action.coordinates) > 1:
        if beta is not None or kind == "instanton":
            what = "beta" if beta is not None else "kind"
            raise RequestError(f"{what} is for paths; bounces of a field are solved for at zero temperature only")
        parts = field_saddle(action, couplings, start)
    else:
        parts = _paths(action, couplings, start, kind, beta)
    found = Saddles(action=action, couplings=couplings, **parts)
    request = {"vacuum": None if start is None else list(start), "kind": kind, "beta": beta}
    return _recorded(found, request, time.perf_counter() - begun)


def _examined(action: Action, couplings: Mapping[str, float]) -> None:
    """Raises ActionError where the action has no meaning; a potential that falls without limit has one here."""
    for finding in check(action.euclidean, couplings):
        falls = finding.topic == "bounded" and finding.message.startswith("not bounded below")
        if finding.severity == "fatal" and not falls:
            place = next((f.span for f in action.findings if f.topic == finding.topic and f.span), None)
            raise ActionError(finding.message, span=place, text=action.text if place else None)


def _start(action: Action, vacuum: float | Sequence[float] | None) -> tuple[float, ...] | None:
    if vacuum is None:
        return None
    try:
        values = tuple(float(v) for v in np.atleast_1d(np.asarray(vacuum, dtype=np.float64)).ravel())
    except (TypeError, ValueError):
        raise RequestError(f"vacuum must be a number for each path, got {vacuum!r}") from None
    if len(values) != len(action.euclidean.variables) or not np.isfinite(values).all():
        names = ", ".join(_names(action))
        form = "" if len(_names(action)) == 1 else ", such as vacuum=(1, 0), or vacuum=1:0 on the line of a magic"
        raise RequestError(f"vacuum must be one finite number for each of {names}{form}, got {vacuum!r}")
    return values


def _names(action: Action) -> list[str]:
    return [notation(Expression.of(v)) for v in action.euclidean.variables]


# --- paths ------------------------------------------------------------------------------------------------------
def _paths(
    action: Action,
    couplings: Mapping[str, float],
    start: tuple[float, ...] | None,
    kind: str | None,
    beta: float | None,
) -> dict[str, Any]:
    problem = paths_problem(action.euclidean, couplings)
    land = survey(problem)
    vacuum = chosen(land, start)
    level = len(land.level_with(vacuum)) > 1
    if (kind or ("instanton" if level else "bounce")) == "instanton":
        if not level:
            raise SaddleError(
                "there is no second minimum of the same height, so that there is no instanton: kind=bounce"
            )
        if beta is not None:
            raise SaddleError(
                "beta asks for a decay at a temperature, and the minima are level, so that nothing decays: "
                "leave beta out "
                "for the splitting, or use levels with beta"
            )
        return _instanton(action, land, tunnelling(land, vacuum))
    return _bounce(action, problem, escape(land, vacuum, beta))


def _phase_of_a_turn(action: Action, problem: Problem) -> float:
    """The integral of A once around the circle of a single angle; zero elsewhere."""
    period, drift = problem.periods[0], action.euclidean.drift[0]
    if period is None or problem.size > 1:
        return 0.0
    angles = np.arange(DRAWN) * period / DRAWN
    return period * float(np.mean(drift.evaluate({**problem.scalars, problem.variables[0]: angles}, np)))


def _instanton(action: Action, land: Landscape, found: Sequence[Saddle]) -> dict[str, Any]:
    first = found[0]
    theta = _phase_of_a_turn(action, land.problem)
    rates = tunnelling_rates(land, equivalents(found), theta)
    rows = [*_rows(first), *(_rate_row(r.label, r.latex, r.value, r.error, r.why) for r in rates)]
    assert first.end is not None
    facts = [
        (
            "path",
            f"from {_place(land.problem, first.vacuum.x)} to {_place(land.problem, first.end.x)}, centre at t = 0",
        ),
        *_facts(first, found),
    ]
    return _parts(action, land.problem, first, rows, doubts(first), facts)


def _bounce(action: Action, problem: Problem, found: Sequence[Saddle]) -> dict[str, Any]:
    first, alike = found[0], equivalents(found)
    rate = decay_rate(first, len(alike))
    critical = crossover(first)
    assert first.barrier is not None and critical is not None
    rows = [
        *_rows(first),
        Row("V_b", "V_b", first.barrier.height - first.vacuum.height),
        Row("T_c", "T_c", critical),
        _rate_row(rate.label, rate.latex, rate.value, rate.error, rate.why),
    ]
    ways = "" if len(alike) == 1 else f"; {len(alike)} of them are equivalent, and the rate is of all"
    facts = [
        (
            "path",
            f"from {_place(problem, first.vacuum.x)} over the barrier at {_place(problem, first.barrier.x)}{ways}",
        ),
        ("crossover", f"bounces begin below T_c = omega_b/(2 pi), at beta = {1 / critical:.6g}"),
        *([("turning points", ", ".join(f"beta = {b:.6g}" for b in first.turning))] if first.turning else []),
        *_facts(first, [s for s in found if s not in alike[1:]]),
    ]
    return _parts(action, problem, first, rows, doubts(first), facts)


def _rate_row(label: str, latex: str, value: float | None, error: float, why: str) -> Row:
    if value is None:
        return Row(label, latex, None, state="withheld", remark=why)
    return Row(label, latex, value, error)


def _rows(first: Saddle) -> list[Row]:
    rows = [
        Row("S", "S", first.action, first.action_error),
        *([Row("duration", r"\Delta t", first.duration, first.duration_error)] if first.norm else []),
        Row("omega", r"\omega", float(first.vacuum.frequencies[0])),
    ]
    if first.modes is not None:
        negative = first.modes.negative
        rows += [
            Row("negative modes", r"n_-", float(negative)),
            Row("zero modes", r"n_0", float(first.modes.zero_modes)),
        ]
        if negative:
            rows.append(Row("lambda_-", r"\lambda_-", float(first.modes.values[0]), float(first.modes.errors[0])))
    if first.ratio is not None and first.modes is not None:
        symbol = r"\det' / \det_0" if first.ratio.zero_modes else r"\det / \det_0"
        label = "det'/det_0" if first.ratio.zero_modes else "det/det_0"
        rows.append(Row(label, symbol, first.ratio.ratio, first.ratio.error))
        if first.kind != "static":
            rows.append(Row(f"{label}, on a lattice", f"{symbol}, a \\to 0", first.modes.ratio, first.modes.error))
    return rows


def _facts(first: Saddle, found: Sequence[Saddle]) -> list[tuple[str, str]]:
    how = {
        "instanton": "Newton's method on a cosine series, steps along the free motion taken out",
        "bounce": "Newton's method on a cosine series, continued in the period from the top of the barrier",
        "thermal bounce": "Newton's method on a cosine series, continued in the period from the top of the barrier",
        "static": "the path that rests on top of the barrier",
    }
    others = [s for s in found[1:] if abs(s.action - first.action) > 1e-8 * first.action]
    told = ", ".join(f"S = {s.action:.8g} ({s.kind})" for s in others[:6])
    determinant = "Gelfand and Yaglom, without the zero mode, over that of the oscillator at the minimum"
    return [
        ("method", how[first.kind]),
        *([("grid", f"{len(first.t)} points, t = {first.t[0]:.6g} to {first.t[-1]:.6g}")] if first.norm else []),
        *([("determinant", determinant)] if first.kind != "static" else []),
        *([("other saddles", told)] if told else []),
        ("errors", "numerical; corrections to one loop are of relative order 1/S and not in them"),
    ]


def _place(problem: Problem, x: Floats) -> str:
    values = [f"{v + 0.0:.6g}" for v in problem.q(x)]
    return values[0] if len(values) == 1 else f"({', '.join(values)})"


def _parts(
    action: Action,
    problem: Problem,
    first: Saddle,
    rows: Sequence[Row],
    warnings: Sequence[str],
    facts: Sequence[tuple[str, str]],
) -> dict[str, Any]:
    return {
        "kind": first.kind,
        "t": first.t,
        "path": first.path,
        "rows": tuple(rows),
        "curves": tuple(_curves(action, problem, first)),
        "warnings": tuple(warnings),
        "facts": tuple(facts),
    }


def _curves(action: Action, problem: Problem, first: Saddle) -> list[Curve]:
    """The path in time, and the potential with the path in it; of several paths V along the path."""
    reach = first.t[-1] if first.norm == 0 else min(float(first.t[-1]), max(6 * first.duration, 1e-300))
    t = np.linspace(max(float(first.t[0]), -reach), reach, DRAWN)
    shown = np.stack([np.interp(t, first.t, q) for q in first.path])
    names = _names(action)
    curves = [Curve(f"{name}(t)", f"{name}(t)", "t", _plain(t), _plain(q), style="path")
              for name, q in zip(names, shown, strict=True)]  # fmt: skip
    if problem.size > 1:
        shown = shown if first.end is not None else shown[:, : DRAWN // 2 + 1]  # a bounce comes back the same way
        along = problem.value(problem.x(shown))
        length = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(shown, axis=1), axis=0))])
        if length[-1] > 0:
            curves.append(Curve("V along the path", "V", "length", _plain(length), _plain(along), style="potential"))
        return curves
    low, high = float(np.min(first.path)), float(np.max(first.path))
    left, right = min(low, float(problem.q(first.vacuum.x)[0])), max(high, float(problem.q(first.vacuum.x)[0]))
    beyond = MARGIN * (right - left)
    q = np.linspace(left - beyond, right + beyond, DRAWN)
    value = problem.value(problem.x(q[None]))
    course = np.linspace(low, high, DRAWN)
    curves.append(Curve("V", "V", names[0], _plain(q), _plain(value), style="potential"))
    heights = problem.value(problem.x(course[None]))
    curves.append(Curve("the path", "", names[0], _plain(course), _plain(heights), style="course"))
    return curves


def _plain(values: Floats) -> tuple[float, ...]:
    return tuple(map(float, values))


# --- the record -------------------------------------------------------------------------------------------------
def _recorded(found: Saddles, request: dict[str, Any], seconds: float) -> Saddles:
    geometry = found.action.geometry
    shown = Settings(found.couplings, geometry.sites if geometry else 1, geometry.spacing if geometry else 1.0)
    record = base_record("saddle", found.action, shown)
    record["lattice"] = None
    record["request"] = request
    record["method"] = {"saddle": found.kind, **dict(found.facts)}
    record["results"] = [
        {"label": row.label, "kind": "number", "value": row.value, "error": row.error, "state": row.state}
        | with_unit(found.quantity(row.label))
        for row in found.rows
    ]
    record["warnings"] = list(found.warnings)
    record["stop"] = "converged"
    record["wall_seconds"] = round(seconds, 3)
    validate(record)
    return replace(found, record=record, record_name=record_name(record))
