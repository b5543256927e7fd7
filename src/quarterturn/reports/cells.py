"""What stands in the cells of a table: the words and digits of a row, the same in a terminal, a page and a paper.

A number comes with its error or with words in the error's place; a withheld number is not shown at all.
"""

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass

from quarterturn.estimates.printing import format_unresolved, format_value_error
from quarterturn.reports.report import Report, Row

HEADINGS = {
    "label": "observable",
    "value": "value",
    "unit": "unit",
    "exact": "exact",
    "pull": "pull",
    "tau": "tau",
    "n_eff": "n_eff",
    "remark": "remark",
}
NUMBERS = ("value", "exact", "pull", "tau", "n_eff")  # columns that align at the decimal point
SCIENTIFIC = re.compile(r"^(.*)e([+-])0*(\d+)$")  # mantissa, sign and exponent
GUARD_DIGITS = 1  # digits of the exact value beyond the last digit of the measured one
MOST_DIGITS = 12


@dataclass(frozen=True, slots=True)
class Cells:
    """One line of the table, in words. Empty where there is nothing to say."""

    label: str
    latex: str
    value: str
    exact: str = ""
    pull: str = ""
    tau: str = ""
    n_eff: str = ""
    remark: str = ""
    unit: str = ""

    def __getitem__(self, column: str) -> str:
        text: str = getattr(self, column)
        return text


def cells(row: Row) -> Cells:
    """The printed form of `row`."""
    label = one_line(row.label)
    if row.state == "withheld" or row.value is None or not math.isfinite(row.value):
        reason = one_line(row.remark) or "no finite number came out"
        return Cells(label, row.latex, "withheld", remark=reason)
    resolved = row.state == "good"
    value = format_value_error(row.value, row.error) if resolved else format_unresolved(row.value, row.state)
    return Cells(
        label,
        row.latex,
        value,
        exact=format_exact(row.exact, row.error if resolved else None),
        pull=f"{row.pull:+.1f}" if resolved and _finite(row.pull) else "",
        tau=_tau(row),
        n_eff=f"{row.n_eff:.0f}" if _finite(row.n_eff) else "",
        remark=one_line(row.remark),
        unit=one_line(row.unit),
    )


def columns_in_use(table: Sequence[Cells]) -> tuple[str, ...]:
    """The columns that hold something, in their order; observable and value always do."""
    return tuple(name for name in HEADINGS if name in ("label", "value") or any(line[name] for line in table))


def format_exact(exact: float | None, error: float | None) -> str:
    """An independent value, to one digit more than a value with this `error` is printed."""
    if exact is None or not math.isfinite(exact):
        return ""
    if not error or not math.isfinite(error) or exact == 0:
        return f"{exact:.8g}"
    last = math.floor(math.log10(abs(error))) - 1 - GUARD_DIGITS
    power = math.floor(math.log10(abs(exact)))
    if max(power, last + 2) not in range(-4, 6):
        return f"{exact:.{min(max(power - last, 0), MOST_DIGITS)}e}"
    return f"{exact:.{max(0, min(-last, MOST_DIGITS - max(power, 0)))}f}"


def coupling_text(report: Report) -> str:
    """The couplings as they would be typed: lam = 0.1, w = 1."""
    return ", ".join(f"{one_line(name)} = {value:.8g}" for name, value in report.couplings)


def curve_text(report: Report) -> list[str]:
    """One line for each curve that has a label: what it is and where it lies."""
    lines = []
    for curve in report.curves:
        if curve.style in ("correlator", "gap", "path") and curve.x:
            variable = one_line(curve.x_label)
            span = f"{len(curve.x)} points, {variable} = {curve.x[0]:.6g} to {curve.x[-1]:.6g}"
            lines.append(f"{one_line(curve.label)}: {span}")
    return lines


def head_length(number: str) -> int:
    """Characters in front of the decimal point, or of the place where it would stand."""
    for position, letter in enumerate(number):
        if letter not in "+-−0123456789":
            return position
    return len(number)


def one_line(text: str) -> str:
    """`text` on one line, without control characters: a label can neither break a table nor steer a terminal."""
    return " ".join("".join(letter if letter.isprintable() else " " for letter in text).split())


def _tau(row: Row) -> str:
    if not _finite(row.tau):
        return ""
    assert row.tau is not None
    if _finite(row.tau_error) and row.tau_error:
        return format_value_error(row.tau, row.tau_error)
    return f"{row.tau:.2g}" if row.tau < 100 else f"{row.tau:.0f}"


def _finite(number: float | None) -> bool:
    return number is not None and math.isfinite(number)
