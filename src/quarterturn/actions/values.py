"""What a formula can be worth: a number, a vector, or all derivatives of one of these; and what is done with them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from quarterturn.actions.expression import IMAGINARY, ZERO, Expression, PathAtom
from quarterturn.errors import ActionError

Value = Expression | tuple[Expression, ...]


@dataclass(frozen=True)
class Slopes:
    """d phi: the derivative along each coordinate, time first."""

    along: tuple[Value, ...]


def mapped(value: Value, change: Callable[[Expression], Expression]) -> Value:
    """The same done to a number or to each component of a vector."""
    return tuple(change(v) for v in value) if isinstance(value, tuple) else change(value)


def scaled(value: Value, factor: Expression) -> Value:
    return mapped(value, lambda v: v * factor)


def conjugate(value: Value) -> Value:
    """i becomes -i; the variables of a complex field are its real and imaginary parts, which stay."""
    return mapped(value, lambda v: v.substitute(lambda a: -Expression.of(IMAGINARY) if a == IMAGINARY else None))


def dotted(left: Value, right: Value) -> Expression:
    """The dot product of two vectors, or the product of two numbers. Raises ActionError for unequal lengths."""
    if isinstance(left, tuple) and isinstance(right, tuple):
        if len(left) != len(right):
            raise ActionError(f"a dot product of {len(left)} with {len(right)} components")
        return sum((a * b for a, b in zip(left, right, strict=True)), ZERO)
    if isinstance(left, tuple) or isinstance(right, tuple):
        raise ActionError("a dot product needs a vector on both sides")
    return left * right


def contracted_slopes(left: Slopes, right: Slopes, signs: tuple[int, ...]) -> Expression:
    """d f . d g with a diagonal metric."""
    products = (dotted(a, b).scaled(s) for a, b, s in zip(left.along, right.along, signs, strict=True))
    return sum(products, ZERO)


def added(values: list[Value]) -> Value:
    """The sum of numbers, or of vectors of one length. Raises ActionError for a mixture."""
    vectors = [v for v in values if isinstance(v, tuple)]
    if not vectors:
        return Expression.collect(t for v in values for t in v.terms)  # type: ignore[union-attr]
    if len(vectors) < len(values) or len({len(v) for v in vectors}) > 1:
        raise ActionError("a sum of a vector and a number, or of vectors of different length")
    return tuple(sum((v[i] for v in vectors), ZERO) for i in range(len(vectors[0])))


def derivative(value: Value, direction: int) -> Value:
    """The total derivative along a coordinate, by the chain rule. Raises ActionError for a second derivative."""
    return mapped(value, lambda v: _derivative(v, direction))


def _derivative(value: Expression, direction: int) -> Expression:
    if any(atom.order for atom in value.paths):
        what = "time derivatives" if direction == 0 else "derivatives"
        raise ActionError(f"second {what} in the action are not available: integrate by parts")
    if any(s.kind == "source" for s in value.symbols):
        raise ActionError("a derivative of a source: integrate by parts, so that it acts on the field")
    total = ZERO
    for atom in sorted(value.paths, key=lambda a: a.key):
        total = total + value.diff(atom) * Expression.of(atom.derivative(direction))
    return total


def moved(value: Value, direction: int, sign: int) -> Value:
    """The value at the next site of the lattice. Raises ActionError for a field that is a neighbour already."""

    def step(atom: object) -> Expression | None:
        if not isinstance(atom, PathAtom):
            return None
        if atom.neighbour or atom.order:
            raise ActionError("a lattice action joins a site to its nearest neighbours only")
        return Expression.of(atom.moved(direction, sign))

    return mapped(value, lambda v: v.substitute(step))
