"""The degrees of freedom of a cell: paths and fields, their coordinates, components, circles and spheres."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import replace

from quarterturn.actions.expression import Expression
from quarterturn.actions.model import Path
from quarterturn.actions.numbers import constant_value
from quarterturn.actions.scope import Scope
from quarterturn.errors import ActionError, Span
from quarterturn.notation.symbols import COMPLEX, CONSTANTS, COORDINATES, FUNCTIONS, GEOMETRY, MEASURES, PIECES
from quarterturn.notation.tree import Constraint, Number, PathStatement

MOST_VARIABLES = 64


def taken(name: str) -> bool:
    """Whether a name has a meaning of its own."""
    return any(name in table for table in (FUNCTIONS, CONSTANTS, MEASURES, GEOMETRY, COMPLEX, PIECES))


def degrees(
    text: str, statements: list[PathStatement], constraints: list[Constraint], missing: Span
) -> tuple[dict[str, Path], tuple[str, ...]]:
    """The paths and fields by name, and their common coordinates. Raises ActionError with the place."""
    found: dict[str, Path] = {}
    coordinates: tuple[str, ...] = ()
    for s in statements:
        if s.name in found:
            raise _error(text, f"{s.name} is declared twice", s.span)
        if taken(s.name):
            raise _error(text, f"{s.name} has a meaning of its own and can't name a path", s.span, f"{s.name}_1(t)")
        if s.kind == "group":
            raise _error(text, "group-valued fields are not available yet", s.span)
        if coordinates and s.coordinates != coordinates:
            raise _error(
                text, f"all fields of an action have the same coordinates; the first has ({', '.join(coordinates)})",
                s.span, f"{s.name}({', '.join(coordinates)})",
            )  # fmt: skip
        coordinates = _coordinates(text, s)
        found[s.name] = Path(s.name, s.components, _period(text, s), s.span, s.kind)
    if not found:
        raise _error(
            text, "no path is declared: the first line names the degrees of freedom, such as q(t)", missing, "q(t)"
        )
    for c in constraints:
        found[c.name] = _on_sphere(text, c, found)
    if sum(len(p.atoms) for p in found.values()) > MOST_VARIABLES:
        raise _error(text, f"more than {MOST_VARIABLES} degrees of freedom", statements[0].span)
    return found, coordinates


def _error(text: str, message: str, span: Span, repair: str | None = None) -> ActionError:
    return ActionError(message, span=span, text=text, repair=repair)


def _coordinates(text: str, s: PathStatement) -> tuple[str, ...]:
    names, inside = s.coordinates, ", ".join(s.coordinates)
    if names and names[0] == "t" and set(names) <= set(COORDINATES) and len(set(names)) == len(names):
        return names
    if len(names) == 1 and names[0] not in COORDINATES:
        raise _error(text, f"a path depends on t: {s.name}(t)", s.span, f"{s.name}(t)")
    strange = [n for n in names if n not in COORDINATES]
    if strange:
        words = f"the coordinates are called t, x, y, z; {strange[0]} is none of them"
    elif len(set(names)) < len(names):
        words = "a coordinate stands twice"
    else:
        words = f"time comes first, as in {s.name}(t, x): one direction of the lattice is imaginary time"
    wanted = ", ".join(COORDINATES[: min(max(len(names), 1), 4)])
    repair = f"{s.name}({wanted})" if inside != wanted else None
    raise _error(text, words, s.span, repair)


def _period(text: str, s: PathStatement) -> Expression | None:
    if s.period is None:
        return None
    scope = Scope(text, {}, {}, {})
    if s.components:
        raise _error(text, "a vector of angles: declare each angle by itself", s.span)
    try:
        value = constant_value(scope, s.period, "a period")
    except ActionError:
        value = 0.0
    if not value > 0:
        raise _error(text, "a period is a positive constant, as in mod 2 pi", s.period.span, "mod 2 pi")
    return scope.number(s.period)


def _on_sphere(text: str, c: Constraint, known: Collection[str] | dict[str, Path]) -> Path:
    path = known.get(c.name) if isinstance(known, dict) else None
    if path is None:
        raise _error(text, f"{c.name} is not declared", c.span)
    if path.kind != "real" or path.components < 2:
        raise _error(
            text, f"a constraint such as n.n = 1 needs a real vector of two or more components: {c.name}[3](t)", c.span
        )
    if not isinstance(c.value, Number) or c.value.value != 1:
        raise _error(
            text, f"the length of a constrained vector is 1: scale the action, {c.name}.{c.name} = 1", c.value.span, "1"
        )
    return replace(path, kind="unit")
