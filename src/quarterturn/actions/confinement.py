"""What the decisions about a potential share: their outcome, and its terms sorted by degree."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from quarterturn.actions.expression import Atom, Expression, PathAtom, Symbol
from quarterturn.actions.printing import notation

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

Degrees = dict[int, list[tuple[dict[PathAtom, int], Expression, float]]]


@dataclass(frozen=True)
class Confinement:
    """verdict: confined | unbounded | singular | flat | undecided | meaningless; `words` say where and how decided.

    `degree` is that of the terms which decided, where the potential is a polynomial.
    """

    verdict: str
    words: str = ""
    degree: int | None = None


def is_polynomial(potential: Expression) -> bool:
    """A polynomial in the paths."""
    return all(
        (isinstance(atom, PathAtom) and power > 0) or not Expression.of(atom).paths
        for monomial, _ in potential.terms
        for atom, power in monomial
    )


def value_at(expression: Expression, couplings: Mapping[str, float]) -> float:
    """The number that an expression without paths is at these couplings; nan or inf where it is none."""
    import numpy as np

    lookup: dict[Atom, object] = {Symbol("coupling", n): np.float64(v) for n, v in couplings.items()}
    with np.errstate(all="ignore"):
        try:
            value = complex(expression.evaluate(lookup, np))
        except OverflowError:  # a coefficient beyond the range of floating-point numbers
            return float("inf")
    return value.real if value.imag == 0 else float("nan")


def by_degree(potential: Expression, couplings: Mapping[str, float]) -> Degrees:
    """Terms with equal powers of the paths collected, with their numerical coefficients, by total degree."""
    collected: dict[tuple[tuple[PathAtom, int], ...], Expression] = {}
    for monomial, coefficient in potential.terms:
        powers = tuple((a, p) for a, p in monomial if isinstance(a, PathAtom))
        rest = Expression(((tuple((a, p) for a, p in monomial if not isinstance(a, PathAtom)), coefficient),))
        collected[powers] = collected[powers] + rest if powers in collected else rest
    result: Degrees = {}
    for powers, expression in collected.items():
        value = value_at(expression, couplings)
        if value != 0:
            result.setdefault(sum(p for _, p in powers), []).append((dict(powers), expression, value))
    return result


def named(lines: tuple[PathAtom, ...], u: NDArray[np.float64]) -> str:
    return ", ".join(f"{notation(Expression.of(v))}: {x + 0.0:.2g}" for v, x in zip(lines, u, strict=True))


def form_at(terms: list, lines: tuple[PathAtom, ...], u: NDArray[np.float64]) -> NDArray[np.float64]:
    import numpy as np

    total = np.zeros(len(u))
    for powers, _, value in terms:
        term = np.full(len(u), value)
        for v, p in powers.items():
            term = term * u[:, lines.index(v)] ** p
        total += term
    return total
