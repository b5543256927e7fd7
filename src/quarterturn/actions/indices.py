"""Indices: which of them a formula leaves open, which it contracts, and what is wrong with the others.

An index that occurs twice in a product is summed over. In a Lagrangian an index of space-time must stand once up and
once down; the metric is diagonal, so that d^mu is d_mu times a sign. Indices of components have no height. Where the
action is Euclidean (LE, SE) heights don't matter (common practice).
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterator
from dataclasses import dataclass

from quarterturn.errors import ActionError, Span
from quarterturn.notation.symbols import COORDINATES
from quarterturn.notation.tree import (
    Array,
    Average,
    Call,
    Cases,
    Component,
    Derivative,
    Dot,
    Factorial,
    Gradient,
    Mean,
    Negative,
    Neighbour,
    Node,
    Number,
    Prime,
    Product,
    Quotient,
    Raised,
    Sum,
    SumOver,
)

Complaint = Callable[[str, Span, str | None], ActionError]


@dataclass(frozen=True)
class Index:
    """One occurrence of an index that is still open. kind: component | direction."""

    name: str
    kind: str
    up: bool
    span: Span


@dataclass(frozen=True)
class IndexRules:
    """Where an index may stand: coordinates are no indices, `bound` ones have a value already."""

    bound: Collection[str]
    heights: bool  # whether an index of space-time must stand once up and once down
    error: Complaint

    def open(self, node: Node) -> tuple[Index, ...]:
        """The indices that a formula leaves open. Raises ActionError where one is used wrongly."""
        match node:
            case Component():
                own = tuple(
                    Index(i, "component", False, node.span)
                    for i in node.indices
                    if isinstance(i, str) and i not in self.bound
                )
                return self.distinct((*self.open(node.base), *own))
            case Derivative():
                inner = self.open(node.base)
                if node.index in COORDINATES or node.index in self.bound:
                    return inner
                return self.distinct((Index(node.index, "direction", node.up, node.span), *inner))
            case Neighbour():
                own_direction = node.direction not in COORDINATES and node.direction not in self.bound
                here = (Index(node.direction, "direction", False, node.span),) if own_direction else ()
                return (*self.open(node.base), *here)
            case Negative():
                return self.open(node.body)
            case Prime() | Gradient() | Factorial():
                return self.open(node.base)
            case Sum():
                return self.of_sum(node)
            case Product() | Dot() | Quotient():
                return self.remaining([i for factor in factors(node) for i in self.open(factor)])
            case Raised():
                return self.of_power(node)
            case SumOver():
                return self.within(node).open(node.body)
            case Call():
                return self.of_call(node)
            case Cases():
                for part in (*(value for value, _ in node.pieces), node.otherwise):
                    self.closed(part)
        return ()

    def within(self, node: SumOver) -> IndexRules:
        return IndexRules({*self.bound, node.index}, self.heights, self.error)

    def closed(self, node: Node) -> None:
        """Raises ActionError for an index that is left over."""
        for index in self.open(node):
            where = "write its partner beside it" if index.kind == "component" else "contract it, as in d_mu d^mu"
            raise self.error(
                f"the index {index.name} is left over: it occurs once here, so nothing is summed; {where}, or sum over "
                f"it with sum_{index.name}", index.span, None,
            )  # fmt: skip

    def distinct(self, indices: tuple[Index, ...]) -> tuple[Index, ...]:
        names = [i.name for i in indices]
        for i in indices:
            if names.count(i.name) > 1:
                raise self.error(f"the index {i.name} is used twice on one quantity", i.span, None)
        return indices

    def of_sum(self, node: Sum) -> tuple[Index, ...]:
        found = [self.open(term) for term in node.terms]
        wanted = {i.name for i in found[0]}
        for other in found[1:]:
            odd = {i.name for i in other} ^ wanted
            if odd:
                index = next(i for i in (*other, *found[0]) if i.name in odd)
                raise self.error(
                    f"the index {index.name} is left over in one term of this sum and not in the others",
                    index.span, None,
                )  # fmt: skip
        return found[0]

    def of_power(self, node: Raised) -> tuple[Index, ...]:
        base = self.open(node.base)
        if not base:
            return ()
        times = int(node.exponent.value) if isinstance(node.exponent, Number) else 0
        return self.remaining([i for i in base for _ in range(max(times, 1))] if times > 1 else list(base))

    def of_call(self, node: Call) -> tuple[Index, ...]:
        if node.name in ("conj", "Re", "Im", "abs") and len(node.arguments) == 1:
            return self.open(node.arguments[0])
        for argument in node.arguments:
            self.closed(argument)
        return ()

    def remaining(self, indices: list[Index]) -> tuple[Index, ...]:
        """What is left after contracting pairs. Raises ActionError for wrong pairs."""
        left = []
        for name in dict.fromkeys(i.name for i in indices):
            same = [i for i in indices if i.name == name]
            if len(same) > 2:
                words = f"the index {name} is used {len(same)} times in one product; an index is summed over in pairs"
                repair = f"sum_{name} …" if same[0].kind == "component" else None
                raise self.error(
                    words + (f", and sum_{name} in front sums over it explicitly" if repair else ""), same[2].span, None
                )
            if len({i.kind for i in same}) > 1:
                raise self.error(f"the index {name} counts components here and directions there", same[1].span, None)
            if len(same) == 1:
                left.append(same[0])
            elif same[0].kind == "direction" and self.heights and same[0].up == same[1].up:
                raise self.wrong_height(same[0], same[1])
        return tuple(left)

    def wrong_height(self, first: Index, second: Index) -> ActionError:
        place = "up" if first.up else "down"
        repair = f"d_{second.name}" if second.up else f"d^{second.name}"
        return self.error(
            f"the index {second.name} stands {place} twice: with a metric, one of the two is up and one down",
            second.span, repair,
        )  # fmt: skip


def factors(node: Node) -> Iterator[Node]:
    """The factors of a product from left to right, what stands below the line of a quotient included."""
    waiting = [node]
    while waiting:
        here = waiting.pop()
        match here:
            case Product() | Dot() | Quotient():
                waiting += [here.right, here.left]
            case Negative():
                waiting.append(here.body)
            case _:
                yield here


def contracted(node: Node, rules: IndexRules) -> list[Index]:
    """The indices that this very node sums over, one occurrence of each."""
    if isinstance(node, Raised):
        exponent = node.exponent
        pair = isinstance(exponent, Number) and exponent.value == 2
        return list({i.name: i for i in rules.open(node.base)}.values()) if pair else []
    left = {i.name for i in rules.open(node)}
    inside = [i for factor in factors(node) for i in rules.open(factor)]
    return list({i.name: i for i in inside if i.name not in left}.values())


def mentioned(node: Node, name: str) -> Iterator[tuple[Node, int]]:
    """Where a component index stands: the indexed quantity, and the place of the index among its indices."""
    if isinstance(node, Component):
        for place, index in enumerate(node.indices):
            if index == name:
                yield node.base, place
    for child in parts(node):
        yield from mentioned(child, name)


def parts(node: Node) -> tuple[Node, ...]:
    """The nodes directly inside a node of a formula."""
    match node:
        case Sum():
            return node.terms
        case Negative() | SumOver():
            return (node.body,)
        case Product() | Quotient() | Dot():
            return (node.left, node.right)
        case Raised():
            return (node.base, node.exponent)
        case Prime() | Derivative() | Gradient() | Component() | Neighbour() | Factorial():
            return (node.base,)
        case Call():
            return node.arguments
        case Cases():
            conditions = [side for _, tests in node.pieces for c in tests for side in (c.left, c.right)]
            return (*(value for value, _ in node.pieces), *conditions, node.otherwise)
        case Array():
            return node.items
        case Average() | Mean():
            return (node.body,)
    return ()


def has_index(node: Node) -> bool:
    """Whether anything in a formula could carry an index."""
    waiting = [node]
    while waiting:
        here = waiting.pop()
        if isinstance(here, (Component, Derivative, Neighbour, SumOver)):
            return True
        waiting.extend(parts(here))
    return False
