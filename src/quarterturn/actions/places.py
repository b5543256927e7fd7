"""Which term of the written action causes a finding: the terms with their places in the cell."""

from __future__ import annotations

from collections.abc import Callable, Iterable

from quarterturn.actions.expression import Compound, Expression, Monomial, PathAtom
from quarterturn.errors import Span

Places = tuple[tuple[Expression, Span], ...]  # each term of the sum as it was written, and where it stands
Powers = frozenset[tuple[PathAtom, int]]


def place(places: Places, guilty: Callable[[Expression], bool]) -> Span | None:
    """Where the first term stands that is guilty, None where none is."""
    return next((span for term, span in places if guilty(term)), None)


def powers_of(monomial: Monomial) -> Powers:
    """The part of a monomial that is made of paths."""
    return frozenset((a, p) for a, p in monomial if isinstance(a, PathAtom))


def holds_powers(wanted: Iterable[Powers]) -> Callable[[Expression], bool]:
    """Whether a term contains one of these products of paths."""
    looked_for = set(wanted)
    return lambda term: any(powers_of(m) in looked_for for m, _ in term.terms)


def holds_derivative(variables: Iterable[PathAtom], direction: int) -> Callable[[Expression], bool]:
    """Whether a term contains a derivative of one of these variables in a direction."""
    wanted = {v.derivative(direction) for v in variables}
    return lambda term: bool(term.paths & wanted)


def is_no_polynomial(term: Expression) -> bool:
    """Whether a term has a path inside a function."""
    return any(isinstance(a, Compound) and Expression.of(a).paths for m, _ in term.terms for a, _ in m)
