"""Formulas with indices: sums over components and directions, derivatives, components, neighbours on the lattice."""

from __future__ import annotations

import math
from itertools import product as combinations
from typing import TYPE_CHECKING

from quarterturn.actions.effort import spend
from quarterturn.actions.expression import Expression
from quarterturn.actions.indices import contracted, has_index, mentioned
from quarterturn.actions.values import Slopes, Value, added, derivative, moved, scaled
from quarterturn.errors import Span
from quarterturn.notation.tree import (
    Call,
    Component,
    Derivative,
    Dot,
    Gradient,
    Name,
    Neighbour,
    Node,
    Number,
    Prime,
    Product,
    Quotient,
    Raised,
    SumOver,
)

if TYPE_CHECKING:
    from quarterturn.actions.scope import Scope

MOST_COMBINATIONS = 4096  # of the indices that one product sums over


def summed(scope: Scope, node: Product | Quotient | Dot | Raised) -> Value:
    """A product, summed over the indices that it contracts."""
    indices = contracted(node, scope.rules) if has_index(node) else []
    if not indices:
        return scope.multiplied(node)
    ranges = [extent(scope, i.name, i.kind, node, i.span) for i in indices]
    if math.prod(ranges) > MOST_COMBINATIONS:
        raise scope.error("too many indices in one product", node.span)
    names = [i.name for i in indices]
    return added([with_bound(scope, node, names, values) for values in combinations(*map(range, ranges))])


def with_bound(scope: Scope, node: Node, names: list[str], values: tuple[int, ...]) -> Value:
    """The value of a formula where some indices have values."""
    spend(4)
    kept, scope.bound = scope.bound, {**scope.bound, **dict(zip(names, values, strict=True))}
    try:
        return scope.value(node)
    finally:
        scope.bound = kept


def extent(scope: Scope, name: str, kind: str, node: Node, span: Span) -> int:
    """How many values an index has. Raises ActionError where the indexed quantities disagree."""
    if kind == "direction":
        return len(scope.coordinates)
    sizes = set()
    for base, place in mentioned(node, name):
        quantity = base.name if isinstance(base, (Name, Call)) else ""
        if quantity in scope.tensors:
            sizes.add((scope.tensors[quantity] + (0,) * (place + 1))[place])
        elif quantity in scope.paths:
            sizes.add(scope.paths[quantity].components)
        else:
            value = scope.value(base)
            sizes.add(len(value) if isinstance(value, tuple) else 0)
    if len(sizes) != 1 or 0 in sizes:
        found = " and ".join(str(s) for s in sorted(sizes)) or "no"
        raise scope.error(f"the index {name} runs over {found} components here", span)
    return sizes.pop()


def sum_over(scope: Scope, node: SumOver) -> Value:
    """sum_a f, sum_mu f."""
    name = node.index
    if name in scope.coordinates:
        raise scope.error(f"sum_{name} sums over space in a measurement, as in <sum_x phi(t,x) phi(0,0)>", node.span)
    indexed = next(iter(mentioned(node.body, name)), None)
    kind = "component" if indexed is not None else "direction"
    size = extent(scope, name, kind, node.body, node.span)
    return added([with_bound(scope, node.body, [name], (i,)) for i in range(size)])


def value_of_index(scope: Scope, index: int | str, span: Span) -> int:
    """A component from 0. Raises ActionError for an index that nothing sums over."""
    if isinstance(index, int):
        return index - 1
    if index in scope.bound:
        return scope.bound[index]
    raise scope.error(f"the index {index} is left over: it occurs once, so nothing is summed", span)


def _direction(scope: Scope, name: str, span: Span) -> int:
    if name in scope.coordinates:
        return scope.coordinates.index(name)
    if name in ("x", "y", "z", "t"):
        there = ", ".join(scope.coordinates)
        raise scope.error(f"no field depends on {name}: the coordinates here are {there}", span)
    return value_of_index(scope, name, span)


def primed(scope: Scope, node: Prime) -> Value:
    """A derivative in time."""
    value = derivative(scope.value(node.base), 0)
    if not _is_zero(value) or isinstance(node.base, Number):
        return value
    raise scope.error("a prime is the time derivative of a path, as in q'", node.span)


def along(scope: Scope, node: Derivative) -> Value:
    """A derivative along one direction; d^mu carries the sign of the metric."""
    direction = _direction(scope, node.index, node.span)
    value = derivative(scope.value(node.base), direction)
    if _is_zero(value):
        raise scope.error("a derivative acts on a field, as in d_x phi", node.span)
    return scaled(value, Expression.number(scope.signs[direction])) if node.up else value


def gradient(scope: Scope, node: Gradient) -> Slopes:
    """All derivatives together."""
    if scope.momenta:
        words = "a Hamiltonian is written in momenta and derivatives in space, such as (d_x phi)^2"
        raise scope.error(words, node.span)
    body = scope.value(node.base)
    found = tuple(derivative(body, k) for k in range(len(scope.coordinates)))
    if all(_is_zero(v) for v in found):
        raise scope.error("a derivative acts on a field, as in d phi", node.span)
    return Slopes(found)


def component(scope: Scope, node: Component) -> Expression:
    """r[2], n[a] with a value for a, g[1,2]."""
    indices = tuple(value_of_index(scope, i, node.span) for i in node.indices)
    if isinstance(node.base, Name) and node.base.name in scope.tensors and node.base.name not in scope.local:
        shape = scope.tensors[node.base.name]
        if len(indices) != len(shape) or any(not 0 <= i < n for i, n in zip(indices, shape, strict=False)):
            size = " x ".join(map(str, shape))
            raise scope.error(f"{node.base.name} has the shape {size}, counted from 1", node.span)
        return scope.entry(node.base.name, indices)
    body = scope.value(node.base)
    if not isinstance(body, tuple) or len(indices) != 1:
        raise scope.error("only a vector path such as r[2](t) has components", node.span)
    if not 0 <= indices[0] < len(body):
        words = f"component {indices[0] + 1} of a vector of {len(body)}: components count from 1"
        raise scope.error(words, node.span)
    return body[indices[0]]


def neighbour(scope: Scope, node: Neighbour) -> Value:
    """phi(+mu) on the lattice."""
    if not scope.on_lattice:
        raise scope.error("a neighbour such as phi(+mu) belongs to a lattice action: write SE = …", node.span)
    return moved(scope.value(node.base), _direction(scope, node.direction, node.span), node.sign)


def _is_zero(value: Value) -> bool:
    return not any(v.terms for v in (value if isinstance(value, tuple) else (value,)))
