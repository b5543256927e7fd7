"""Points of space-time in measurements: q(t), q(0), phi(t, x), and what stands at which of them."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from typing import TYPE_CHECKING

from quarterturn.actions.couplings import names_in
from quarterturn.actions.indices import parts
from quarterturn.actions.scope import Scope
from quarterturn.notation.tree import Call, Name, Negative, Node, Number, Product, Raised, SumOver

if TYPE_CHECKING:
    from quarterturn.actions.measurements import MeasureScope

FREE = None
SUMMED = "sum"  # a coordinate that sum_x sums over
Place = Fraction | str | None  # of one coordinate
Point = tuple[Place, ...]  # time first


def time_of(point: Point) -> Fraction | None:
    time = point[0]
    assert not isinstance(time, str)
    return time


def shifted(point: Point, origin: Point) -> Point:
    return tuple(p - o for p, o in zip(point, origin, strict=True))  # type: ignore[operator]


def mentions(node: Node, kinds: tuple[type, ...]) -> bool:
    return isinstance(node, kinds) or any(mentions(c, kinds) for c in parts(node))


def points_in(node: Node, scope: MeasureScope) -> Iterator[Point]:
    """The points at which paths are evaluated inside a node."""
    if isinstance(node, SumOver) and node.index in scope.coordinates[1:]:
        kept, scope.summing = scope.summing, True
        try:
            yield from list(points_in(node.body, scope))
        finally:
            scope.summing = kept
        return
    if isinstance(node, Call) and node.name in scope.paths:
        if len(node.arguments) != len(scope.coordinates):
            wanted = "one time" if len(scope.coordinates) == 1 else f"({', '.join(scope.coordinates)})"
            raise scope.error(f"{node.name} depends on {wanted}", node.span)
        yield tuple(_place(a, name, scope) for a, name in zip(node.arguments, scope.coordinates, strict=True))
        return
    for child in parts(node):
        yield from points_in(child, scope)


def untimed(node: Node, scope: Scope) -> bool:
    """Whether a path stands in a node without a time."""
    if isinstance(node, Call) and node.name in scope.paths:
        return False
    if isinstance(node, Name):
        return node.name in scope.paths
    return any(untimed(child, scope) for child in parts(node))


def _place(node: Node, name: str, scope: MeasureScope) -> Place:
    """One coordinate of a point: free, summed over, or a number."""
    if isinstance(node, Name) and node.name == name:
        return SUMMED if scope.summing and name != "t" else FREE
    sign = 1
    while isinstance(node, Negative):
        node, sign = node.body, -sign
    if isinstance(node, Number):
        return sign * node.value
    value = scope.number(node).constant if not names_in(node) else None
    if value is None:
        if name == "t":
            raise scope.error("a time is t or a number, as in q(t), q(0), q(1.5)", node.span)
        raise scope.error(f"a place is {name} or a number", node.span)
    return sign * value


def single_factors(node: Node) -> Iterator[Node]:
    """Factors of a product; whole powers of a factor repeat it."""
    match node:
        case Product():
            yield from single_factors(node.left)
            yield from single_factors(node.right)
        case Raised(exponent=Number() as exponent) if exponent.value.denominator == 1 and 1 < exponent.value <= 8:
            for _ in range(int(exponent.value)):
                yield from single_factors(node.base)
        case _:
            yield node


def partitions(items: list[int]) -> Iterator[list[list[int]]]:
    if not items:
        yield []
        return
    first, rest = items[0], items[1:]
    for partition in partitions(rest):
        yield [[first], *partition]
        for i, block in enumerate(partition):
            yield [*partition[:i], [first, *block], *partition[i + 1 :]]
