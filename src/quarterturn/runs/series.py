"""`series`: the exact perturbation series of one path's level, its sums, and the level itself beside them."""

from __future__ import annotations

import hashlib
import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from decimal import Decimal, localcontext
from fractions import Fraction
from typing import Any

from quarterturn.actions.model import Action
from quarterturn.errors import QuarterturnError, RequestError
from quarterturn.estimates.printing import format_value_error
from quarterturn.imaginary.binding import one_path
from quarterturn.imaginary.growth import Growth
from quarterturn.imaginary.levels import levels as continuum_levels
from quarterturn.imaginary.perturbation import energy_coefficients
from quarterturn.imaginary.polynomials import perturbed_oscillator, written
from quarterturn.imaginary.resummation import digits_for
from quarterturn.imaginary.summation import METHODS, Summation, summation
from quarterturn.imaginary.surds import Exact, bits, decimal, hexadecimal
from quarterturn.records.canonical import record_name
from quarterturn.records.schema import validate
from quarterturn.reports.bundle import mimebundle
from quarterturn.reports.report import Curve, Report, Row
from quarterturn.reports.text import text as render_text
from quarterturn.runs.recording import base_record, with_unit
from quarterturn.runs.settings import NO_SPECTRUM, Settings, examined, split
from quarterturn.runs.unit_words import facts as unit_facts
from quarterturn.runs.unit_words import level as level_unit

DEFAULT_ORDER = 50
SHOWN_TERMS = 6  # of the series, in a report
LONGEST_TERM = 100  # bits of a coefficient that is still shown
FOLLOWED = 20.0  # times the distance of the first sum
RECORDED = 200  # coefficients whose floats a record holds
DETERMINED_TO = 1e-3  # relative error to which the growth must be known to be told

Label = tuple[str, str]  # plain, typeset


@dataclass(frozen=True, eq=False)
class Series:
    """What `series` returns: exact coefficients, sums at the action's coupling, the level they should reach."""

    action: Action
    couplings: Mapping[str, float]
    coupling: str
    level: int
    coefficients: tuple[Exact, ...]  # of coupling^(n / unit), n = 0 … order
    unit: int
    summation: Summation
    exact: float | None  # the level in the continuum, or None
    exact_error: float | None
    warnings: tuple[str, ...] = ()
    record: dict[str, Any] = field(default_factory=dict, repr=False)
    record_name: str = ""

    @property
    def order(self) -> int:
        """The highest power of the coupling, in steps of 1/unit."""
        return len(self.coefficients) - 1

    @property
    def sums(self) -> dict[str, float]:
        """Values by method, those that nothing speaks against."""
        return {m: s.value for m, s in self.summation.sums.items() if self.summation.determined}

    @property
    def growth(self) -> Growth | None:
        """Large-order behaviour of the coefficients; None where they do not show one."""
        return self.summation.growth

    def __getitem__(self, method: str) -> Any:
        """The `Sum` by a method: value, error, order. RequestError lists the methods that gave one."""
        if method in self.summation.sums:
            return self.summation.sums[method]
        why = self.summation.missing.get(method)
        raise RequestError(
            f"there is no sum by {method!r}{f': {why}' if why else ''}; there is {', '.join(self.summation.sums)}"
        )

    def __iter__(self) -> Iterator[str]:
        yield from self.summation.sums

    def __len__(self) -> int:
        return len(self.summation.sums)

    def formula(self, terms: int = SHOWN_TERMS) -> str:
        """The first terms in plain notation: 1/2 + 3/4 lam - 21/8 lam^2 + ..."""
        shown: list[str] = []
        left = False
        for n, e in enumerate(self.coefficients):
            if not e:
                continue
            if len(shown) == terms or bits(e) > LONGEST_TERM:
                left = True
                break
            shown.append(_term(str(e), _power(self.coupling, Fraction(n, self.unit))))
        text = " + ".join(shown or ["0"]).replace("+ -", "- ")
        return f"{text} + ..." if left else text

    def report(self) -> Report:
        """Everything a person sees, as plain data."""
        return Report(
            kind="series",
            title=f"{self.action.name}, series of E_{self.level} in {self.coupling}",
            action_text=self.action.canonical,
            latex=self.action.euclidean.latex,
            couplings=tuple(self.couplings.items()),
            rows=tuple(self._row(method) for method in METHODS),
            curves=tuple(self._curves()),
            warnings=self.warnings,
            facts=_facts(self),
            record_name=self.record_name,
            record=self.record,
        )

    def _row(self, method: str) -> Row:
        plain, typeset = _label(method, self.level)
        unit = level_unit(self.action).name
        found = self.summation.sums.get(method)
        if found is None:
            return Row(plain, typeset, None, state="withheld", remark=self.summation.missing[method])
        remark = f"from coefficients to order {_order_text(found.order * self.summation.stride, self.unit)}"
        if found.ambiguity:
            remark += f"; ambiguous by {found.ambiguity:.2g} i"
        if not self.summation.determined:
            return Row(plain, typeset, found.value, None, self.exact, state="unresolved", remark=remark, unit=unit)
        pull = None
        if self.exact is not None:
            pull = (found.value - self.exact) / math.hypot(found.error, self.exact_error or 0.0)
        return Row(plain, typeset, found.value, found.error, self.exact, pull, remark=remark, unit=unit)

    def _curves(self) -> Iterator[Curve]:
        """Sums against order; where a diverging one has left the region of all the others, it is not followed."""
        stride, unit = self.summation.stride, level_unit(self.action).name
        first = self.summation.by_order["partial sum"][0]
        best = self.exact if self.exact is not None else self.summation.sums["partial sum"].value
        reach = FOLLOWED * max(abs(first - best), 1e-9 * abs(best))
        for method, values in self.summation.by_order.items():
            points = [(n, y) for n, y in enumerate(values) if abs(y - best) <= reach]
            if not points:
                continue
            x = tuple(float(Fraction(n * stride, self.unit)) for n, _ in points)
            exact = (self.exact,) * len(x) if self.exact is not None else ()
            yield Curve(method, "", "order", x, tuple(y for _, y in points), exact=exact, style="orders", unit=unit)

    def __repr__(self) -> str:
        return render_text(self.report())

    def _repr_mimebundle_(self, include: Any = None, exclude: Any = None) -> Any:
        return mimebundle(self.report())


def series(
    action: Action,
    *,
    coupling: str | None = None,
    order: int = DEFAULT_ORDER,
    level: int = 0,
    **keywords: float,
) -> Series:
    """The perturbation series of a level in one coupling, exactly, and its sums.

    Parameters
    ----------
    action
        From `quarterturn.action`: one path, a polynomial potential, an oscillator where the coupling is zero.
    coupling
        The coupling to expand in; may be left out where only one makes the action anharmonic.
    order
        The highest power of the coupling.
    level
        0 for the ground state.
    **keywords
        Couplings. That of the series is where the sums are taken; the others stand for the decimal numbers they print
        as, so that coefficients are exact.

    Returns
    -------
    Series
        `.coefficients` are exact; `["Padé"]`, `["Borel-Padé"]`, `["conformal Borel"]` and `["partial sum"]` are sums
        with error estimates (the change that fewer coefficients make); `.exact` is the level in the continuum, solved
        for independently.

    Raises
    ------
    RequestError
        An unknown coupling, or an order or level that is no whole number.
    SpectrumError
        The action is no polynomially perturbed oscillator of one path, or the order is out of reach.
    """
    for word, value in (("order", order), ("level", level)):
        if isinstance(value, bool) or int(value) != value or value < 0:
            raise RequestError(f"{word} must be a whole number, not negative, got {value!r}")
    couplings, lattice = split(action, keywords)
    if lattice:
        raise RequestError(f"{', '.join(lattice)} has no meaning for a series: it is one in the continuum")
    name = _chosen(action, coupling)
    problem, unit = perturbed_oscillator(action.euclidean, couplings, name)
    if couplings[name] < 0 and unit > 1:
        raise RequestError(f"{name} must not be negative: the action holds a root of it, got {couplings[name]:g}")
    coefficients = energy_coefficients(problem, int(order) * unit, int(level))
    g = _variable(written(couplings[name]), unit, len(coefficients))
    found = summation(problem, coefficients, g)
    exact, error, doubts = _exact_level(action, couplings, int(level))
    result = Series(action, couplings, name, int(level), coefficients, unit, found, exact, error)
    return _recorded(replace(result, warnings=(*_warnings(result), *doubts)))


def _variable(coupling: Fraction, unit: int, count: int) -> Decimal:
    """coupling^(1/unit)."""
    with localcontext(prec=digits_for(count)):
        value = decimal(coupling, digits_for(count))
        return value if unit == 1 or not value else (value.ln() / unit).exp()


def _chosen(action: Action, coupling: str | None) -> str:
    there = ", ".join(action.couplings) or "none"
    if coupling is not None:
        if coupling not in action.couplings:
            raise RequestError(f"coupling must be one of the action's; {coupling!r} is not among {there}")
        return str(coupling)
    defaults = {name: c.default for name, c in action.couplings.items()}
    possible = []
    for name in action.couplings:
        try:
            problem, _ = perturbed_oscillator(action.euclidean, defaults, name)
        except QuarterturnError:
            continue
        if problem.growth > 0:
            possible.append(name)
    if len(possible) == 1:
        return possible[0]
    if not possible and len(action.couplings) == 1:
        return next(iter(action.couplings))  # for the complaint that belongs to it
    example = (possible or [*action.couplings, "lam"])[0]
    raise RequestError(
        f"say which coupling the series is in, as in series(…, coupling={example!r}); the couplings are {there}"
    )


def _exact_level(
    action: Action, couplings: Mapping[str, float], level: int
) -> tuple[float | None, float | None, list[str]]:
    """The level and its numerical error; or why there is none."""
    try:
        examined(action, couplings, NO_SPECTRUM)
        problem = one_path(action.euclidean, couplings)
        if problem is None:
            return None, None, ["the drift depends on the path: no exact level stands beside the sums"]
        found = continuum_levels(problem, level + 1)
    except QuarterturnError as trouble:
        return None, None, [f"no exact level stands beside the sums: {trouble.message}"]
    return float(found.energies[level]), float(found.errors[level]), []


def _warnings(result: Series) -> Iterator[str]:
    if not result.summation.determined:
        growth = result.growth
        size = ""
        if growth is not None and result.couplings[result.coupling]:
            z = float(result.couplings[result.coupling]) ** (result.summation.stride / result.unit)
            exponent = abs(growth.singularity / z) ** (1 / growth.rate)
            size = f" (here in powers of exp(-{exponent / 2:.3g})),"
        yield (
            "the later terms have equal signs: the series does not determine the level. Effects beyond every order of "
            f"the coupling{size or ','} such as the splitting of levels by tunnelling or a decay, "
            "are not in any of these sums"
        )


# --- words --------------------------------------------------------------------------------------------------------
def _label(method: str, level: int) -> Label:
    typeset = method.replace("é", r"\acute{e}").replace("-", r"\text{-}").replace(" ", r"\ ")
    return f"E_{level}, {method}", rf"E_{{{level}}},\ \mathrm{{{typeset}}}"


def _power(name: str, power: Fraction) -> str:
    if power == 0:
        return ""
    shown = str(power) if power.denominator == 1 else f"({power})"
    return name if power == 1 else f"{name}^{shown}"


def _term(coefficient: str, power: str) -> str:
    if not power:
        return coefficient
    if " " in coefficient.strip():
        return f"({coefficient}) {power}"
    return power if coefficient == "1" else f"-{power}" if coefficient == "-1" else f"{coefficient} {power}"


def _order_text(n: int, unit: int) -> str:
    return str(Fraction(n, unit))


def _facts(result: Series) -> tuple[tuple[str, str], ...]:
    facts = [
        ("series", f"E_{result.level} = {result.formula()}"),
        ("coefficients", f"exact, to order {_order_text(result.order, result.unit)} in {result.coupling}"),
    ]
    growth = result.growth
    if growth is not None and growth.singularity_error < DETERMINED_TO * abs(growth.singularity):
        facts += _growth_facts(result, growth)
    if result.exact is not None:
        solved = format_value_error(result.exact, result.exact_error)
        facts.append(("exact", f"E_{result.level} = {solved}, solved for"))
    facts.append(("errors", "from the change that one, two and a sixth fewer coefficients make: estimates, no bounds"))
    return (*facts, *unit_facts(result.action))


def _growth_facts(result: Series, growth: Growth) -> list[tuple[str, str]]:
    stride = result.summation.stride
    argument = f"{growth.rate if growth.rate > 1 else ''}n + b"
    variable = _power(result.coupling, Fraction(stride, result.unit))
    index = f"the coefficient of ({variable})^n" if variable != result.coupling else f"the coefficient of {variable}^n"
    return [
        (
            "large orders",
            f"{index} grows like C Gamma({argument}) / S^n, "
            f"S = {format_value_error(growth.singularity, growth.singularity_error)}, "
            f"b = {format_value_error(growth.offset, growth.offset_error)}, "
            f"C = {format_value_error(growth.constant, growth.constant_error)}",
        ),
        ("Borel transform", f"nearest singularity at {variable} = {growth.singularity:.6g}"),
    ]


# --- record -------------------------------------------------------------------------------------------------------
def _recorded(result: Series) -> Series:
    record = base_record("series", result.action, Settings(result.couplings, 0, 0.0))
    record["lattice"] = None
    record["request"] = {
        "coupling": result.coupling,
        "order": result.order // result.unit,
        "level": result.level,
    }
    report = result.report()
    exact_text = "\n".join(map(hexadecimal, result.coefficients))
    record["method"] = {
        **dict(report.facts),
        "coefficients_sha256": hashlib.sha256(exact_text.encode()).hexdigest(),
        "first_coefficients": [str(e) for e in result.coefficients[:RECORDED] if bits(e) <= LONGEST_TERM],
        "exact_level": result.exact,
    }
    record["results"] = [
        {
            "label": row.label,
            "kind": "number",
            "value": row.value,
            "error": row.error,
            "state": row.state,
            **({"remark": row.remark} if row.remark else {}),
            **with_unit(level_unit(result.action)),
        }
        for row in report.rows
    ]
    record["warnings"] = list(result.warnings)
    record["stop"] = "converged"
    record["wall_seconds"] = 0.0
    validate(record)
    return replace(result, record=record, record_name=record_name(record))
