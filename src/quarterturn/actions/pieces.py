"""Potentials in pieces: cases with conditions, and tables of numbers with a stated interpolation."""

from __future__ import annotations

import difflib
import hashlib
from fractions import Fraction
from itertools import pairwise
from pathlib import Path as File
from typing import TYPE_CHECKING

from quarterturn.actions.expression import Expression, Tabulated, chosen
from quarterturn.actions.tables import INTERPOLATIONS
from quarterturn.errors import ActionError
from quarterturn.notation.tree import Array, Call, Cases, Comparison, Name, Negative, Node, Number, Text

if TYPE_CHECKING:
    from quarterturn.actions.scope import Scope

MOST_POINTS = 10_000
LARGEST_FILE = 2_000_000  # bytes
Points = tuple[tuple[Fraction, Fraction], ...]


def cases(scope: Scope, node: Cases) -> Expression:
    """{f where …, g otherwise} as an expression."""
    branches = tuple(
        (tuple(_condition(scope, c) for c in conditions), scope.number(value)) for value, conditions in node.pieces
    )
    return chosen(branches, scope.number(node.otherwise))


def _condition(scope: Scope, c: Comparison) -> tuple[Expression, str]:
    left, right = scope.number(c.left), scope.number(c.right)
    difference = left - right if c.sign.startswith("<") else right - left
    if any(atom.order for atom in difference.paths):
        raise scope.error("a velocity in a condition: pieces belong to the potential", c.span)
    return difference, "<=" if c.sign.endswith("=") else "<"


def table(scope: Scope, node: Call) -> Expression:
    """table(points or file, argument, interpolation). Raises ActionError with the place."""
    if len(node.arguments) != 3:
        raise scope.error("a table has three parts, as in table([[-1, 0.5], [0, 0], [1, 0.5]], q, cubic)", node.span)
    data, argument, interpolation = node.arguments
    if not isinstance(interpolation, Name) or interpolation.name not in INTERPOLATIONS:
        written = interpolation.name if isinstance(interpolation, Name) else ""
        near = difflib.get_close_matches(written, INTERPOLATIONS, n=1)
        raise scope.error(
            f"the interpolation of a table is one of {', '.join(INTERPOLATIONS)}", interpolation.span,
            near[0] if near else None,
        )  # fmt: skip
    points = _from_file(scope, data) if isinstance(data, Text) else _inline(scope, data)
    _check(scope, points, data)
    return Expression.of(Tabulated(points, interpolation.name, scope.number(argument)))


def _inline(scope: Scope, data: Node) -> Points:
    if not isinstance(data, Array):
        raise scope.error('a table begins with its points [[x, y], …] or with a file such as "well.csv"', data.span)
    rows = []
    for row in data.items:
        if not isinstance(row, Array) or len(row.items) != 2:
            raise scope.error("each point of a table is a pair [x, y]", row.span)
        rows.append((_number(scope, row.items[0]), _number(scope, row.items[1])))
    return tuple(rows)


def _number(scope: Scope, node: Node) -> Fraction:
    sign = 1
    while isinstance(node, Negative):
        node, sign = node.body, -sign
    if isinstance(node, Number):
        return sign * node.value
    value = scope.number(node).constant
    if value is None:
        raise scope.error("a table holds plain numbers", node.span)
    return sign * value


def _from_file(scope: Scope, data: Text) -> Points:
    """Two columns, separated by white space or a comma; # begins a comment, and a first line of words is a heading."""
    try:
        file = File(data.value)
        size = file.stat().st_size
        if not file.is_file():
            raise scope.error(f"{data.value!r} is no file", data.span)
        if size > LARGEST_FILE:
            raise scope.error(f"{data.value} has {size} bytes; {LARGEST_FILE} are the most", data.span)
        with file.open("rb") as stream:
            content = stream.read(LARGEST_FILE + 1)  # some files do not know how large they are
        if len(content) > LARGEST_FILE:
            raise scope.error(f"{data.value} has more than {LARGEST_FILE} bytes", data.span)
    except (OSError, ValueError) as trouble:
        reason = getattr(trouble, "strerror", None) or "no such name"
        raise scope.error(f"the file {data.value!r} can't be read: {reason}", data.span) from None
    rows: list[tuple[Fraction, Fraction]] = []
    for number, line in enumerate(content.decode("utf-8", errors="replace").splitlines(), start=1):
        words = line.split("#")[0].replace(",", " ").split()
        if not words:
            continue
        try:
            x, y = (_decimal(word) for word in words)
        except ValueError:
            if not rows and number == 1:
                continue
            words_expected = f"{data.value}, line {number}: two numbers are expected, got {line.strip()[:40]!r}"
            raise scope.error(words_expected, data.span) from None
        rows.append((x, y))
    scope.files[data.value] = hashlib.sha256(content).hexdigest()
    return tuple(rows)


def _decimal(word: str) -> Fraction:
    value = float(word)
    if value - value != 0:
        raise ValueError(word)
    return Fraction(repr(value))


def _check(scope: Scope, points: Points, data: Node) -> None:
    def complain(words: str) -> ActionError:
        return scope.error(words, data.span)

    if len(points) < 2:
        raise complain("a table needs at least two points")
    if len(points) > MOST_POINTS:
        raise complain(f"a table of more than {MOST_POINTS} points")
    for (x, _), (after, _) in pairwise(points):
        if not x < after:
            raise complain(f"the points of a table stand in ascending order; {float(after):g} follows {float(x):g}")
