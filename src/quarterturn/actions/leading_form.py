"""Leading forms of several variables that are decided exactly, and what coupling would mend them."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import TYPE_CHECKING

from quarterturn.actions.confinement import Confinement, Degrees, form_at, named, value_at
from quarterturn.actions.expression import Expression, PathAtom
from quarterturn.actions.printing import notation
from quarterturn.actions.stability import HIGHEST_DEGREE, MOST_COPOSITIVE, least_binary, least_copositive

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray


def decided_exactly(
    degrees: Degrees, lines: tuple[PathAtom, ...], couplings: Mapping[str, float]
) -> Confinement | None:
    """The leading form decided over the rationals, where a procedure applies and it does not vanish anywhere."""
    top = max(degrees)
    form = [(powers, expression, Fraction(repr(value))) for powers, expression, value in degrees[top]]
    if top % 2 == 0 and all(p % 2 == 0 for powers, _, _ in form for p in powers.values()) and top in (2, 4):
        return _in_squares(form, lines, top, couplings)
    if len(lines) == 2 and top % 2 == 0 and top <= HIGHEST_DEGREE:
        x = lines[0]
        coefficients = [Fraction(0)] * (top + 1)
        for powers, _, value in form:
            coefficients[powers.get(x, 0)] += value
        sign = least_binary(coefficients)
        if sign == "positive":
            return Confinement("confined")
        if sign == "negative":
            directions_ = _round_the_plane()
            u = directions_[form_at(degrees[top], lines, directions_).argmin()]
            how = f"decided exactly, by a Sturm chain for its terms of degree {top}"
            words = f"the potential falls without limit along the direction ({named(lines, u)}); {how}"
            return Confinement("unbounded", words, top)
    return None


def _round_the_plane() -> NDArray[np.float64]:
    """Directions in the plane, closely spaced."""
    import numpy as np

    angles = np.linspace(0, np.pi, 4001)
    return np.stack([np.cos(angles), np.sin(angles)], axis=1)


def _in_squares(
    form: list[tuple[dict[PathAtom, int], Expression, Fraction]],
    lines: tuple[PathAtom, ...],
    top: int,
    couplings: Mapping[str, float],
) -> Confinement | None:
    """A form of degree 2 or 4 in squares alone: x.M.x over x >= 0."""
    import numpy as np

    if len(lines) > MOST_COPOSITIVE:
        return None
    size = len(lines)
    matrix = [[Fraction(0)] * size for _ in range(size)]
    for powers, _, value in form:
        places = [lines.index(v) for v, p in powers.items() for _ in range(2 * p // top)]
        matrix[places[0]][places[1]] += value / 2
        matrix[places[1]][places[0]] += value / 2
    sign, x = least_copositive(matrix)
    if sign == "positive":
        return Confinement("confined")
    if sign == "zero" or x is None:
        return None
    u = np.sqrt(np.array([float(v) for v in x])) if top == 4 else np.array([float(v) for v in x])
    words = (
        f"the potential falls without limit along the direction ({named(lines, u / np.linalg.norm(u))}); decided "
        f"exactly on its terms of degree {top}{_criterion(form, lines, couplings) if size == 2 and top == 4 else ''}"
    )
    return Confinement("unbounded", words, top)


def _criterion(
    form: list[tuple[dict[PathAtom, int], Expression, Fraction]],
    lines: tuple[PathAtom, ...],
    couplings: Mapping[str, float],
) -> str:
    """For g1 a^4 + g2 b^4 + g12 a^2 b^2: what the mixed coupling has to be above."""
    single: dict[PathAtom, Expression] = {}
    mixed: Expression | None = None
    for powers, expression, value in form:
        if len(powers) == 2:
            mixed = expression if value < 0 else None
        elif value > 0:
            single[next(iter(powers))] = expression
    if mixed is None or len(single) < 2:
        return ""
    first, second = (notation(single[v]) for v in lines)
    return (
        f"; stable for {notation(mixed)} > -2 sqrt({first} {second}), which is {_bound(single, couplings):.4g} here, "
        f"and it is {value_at(mixed, couplings):.4g}"
    )


def _bound(single: Mapping[PathAtom, Expression], couplings: Mapping[str, float]) -> float:
    product = 1.0
    for expression in single.values():
        product *= value_at(expression, couplings)
    return float(-2 * product**0.5)
