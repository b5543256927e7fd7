"""What measurements and brackets are called, in notation and typeset."""

from __future__ import annotations

import re
from fractions import Fraction

from quarterturn.actions.expression import Expression, Symbol
from quarterturn.actions.model import Bracket
from quarterturn.actions.points import SUMMED, Point
from quarterturn.actions.printing import latex, notation, placeholder, typeset_name
from quarterturn.errors import NotationError
from quarterturn.notation.labels import label_of
from quarterturn.notation.tree import Average, MeasureItem

ENERGY = Symbol("observable", "energy")


def measurement_label(text: str) -> str:
    """How a measurement is called in results, whatever the spelling: < q² > is <q^2>."""
    try:
        return label_of(text)
    except NotationError:
        return text


def typeset(item: MeasureItem, brackets: list[Bracket], formula: Expression) -> str:
    """The label typeset: a given label as it is, else the formula with its brackets."""
    if item.label:
        match = re.fullmatch(r"([A-Za-z]\w*)(\(t\))?", item.label)
        return typeset_name(match.group(1)) + (match.group(2) or "") if match else item.label
    if item.source == "energy":
        return "E"
    plain = Expression.of(Symbol("bracket", "0"))
    if formula == plain:
        return _typeset_bracket(brackets[0])
    if isinstance(item.body, Average) and item.body.connected:
        inner = item.source.removesuffix(">_c").removeprefix("<")
        return rf"\langle {inner}\rangle_c"
    text = latex(formula)
    for i, bracket in enumerate(brackets):
        text = text.replace(placeholder(i), _typeset_bracket(bracket))
    return text


def _typeset_bracket(bracket: Bracket) -> str:
    if len(bracket.groups) == 1:
        return rf"\langle {latex(bracket.groups[0][1])}\rangle"
    places = bracket.places or ((),) * len(bracket.groups)
    parts = [
        f"{latex(e)}({_coordinates((time, *place))})" for (time, e), place in zip(bracket.groups, places, strict=True)
    ]
    summed = r"\sum_x " if any(SUMMED in place for place in places) else ""
    return rf"\langle {summed}{' '.join(parts)}\rangle"


def _coordinates(point: Point) -> str:
    names = zip(point, "txyz", strict=False)
    return ", ".join(f"{float(p):g}" if isinstance(p, Fraction) else name for p, name in names)


def bracket_label(groups: tuple[tuple[Point, Expression], ...]) -> str:
    if len(groups) == 1:
        return f"<{notation(groups[0][1])}>"
    summed = "sum_x " if any(SUMMED in point for point, _ in groups) else ""
    return f"<{summed}{' '.join(_at(e, point) for point, e in groups)}>"


def _at(expression: Expression, point: Point) -> str:
    """q(t), (q^2)(0), phi(t, x)."""
    text = notation(expression)
    simple = len(expression.terms) == 1 and expression == Expression.of(next(iter(expression.paths), ENERGY))
    return (text if simple else f"({text})") + f"({_coordinates(point)})"
