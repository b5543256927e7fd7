"""Does the potential confine? Decided on its leading terms where it is a polynomial, on numbers far out otherwise.

The couplings are numbers here: the answer belongs to one choice of them and is asked again at every rerun.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

from quarterturn.actions.asymptotics import (
    MOST_SEARCHED,
    ROUNDING,
    Landscape,
    along_rays,
    along_valleys,
    directions,
    lowest_on_sphere,
)
from quarterturn.actions.expression import Atom, Expression, PathAtom, Symbol
from quarterturn.actions.printing import notation

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

SPHERES = 5
ZERO_FORM = 1e-9  # of the sum of its coefficients: a leading form below it counts as zero
ZERO_BELOW = 1e-5  # the same for lower degrees, which feel the error of the direction, up to the root of ZERO_FORM
Degrees = dict[int, list[tuple[dict[PathAtom, int], Expression, float]]]


@dataclass(frozen=True)
class Confinement:
    """verdict: confined | unbounded | singular | flat | undecided | meaningless; `words` say where and how decided."""

    verdict: str
    words: str = ""


def confinement(
    potential: Expression,
    variables: tuple[PathAtom, ...],
    periods: tuple[Expression | None, ...],
    couplings: Mapping[str, float],
) -> Confinement:
    """Whether V grows in every direction of the variables that live on the line, at all angles of the others."""
    return _confinement(potential, variables, periods, tuple(sorted(couplings.items())))


@lru_cache(maxsize=256)  # a rerun asks again at the same couplings
def _confinement(
    potential: Expression,
    variables: tuple[PathAtom, ...],
    periods: tuple[Expression | None, ...],
    values: tuple[tuple[str, float], ...],
) -> Confinement:
    couplings = dict(values)
    lines = tuple(v for v, period in zip(variables, periods, strict=True) if period is None)
    circles = tuple((v, value_at(p, {})) for v, p in zip(variables, periods, strict=True) if p is not None)
    if is_polynomial(potential) and not potential.paths - set(lines):
        return _polynomial(potential, lines, couplings)
    return _far_out(Landscape(potential, lines, circles, couplings))


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


def _named(lines: tuple[PathAtom, ...], u: NDArray[np.float64]) -> str:
    return ", ".join(f"{notation(Expression.of(v))}: {x + 0.0:.2g}" for v, x in zip(lines, u, strict=True))


# --- polynomials ------------------------------------------------------------------------------------------------
def _polynomial(potential: Expression, lines: tuple[PathAtom, ...], couplings: Mapping[str, float]) -> Confinement:
    import math

    degrees = by_degree(potential, couplings)
    for terms in degrees.values():
        for powers, expression, value in terms:
            if not math.isfinite(value):
                term = notation(_term(powers, expression))
                return Confinement("meaningless", f"the coefficient in {term} is no finite real number here")
    degrees.pop(0, None)
    if not lines:
        return Confinement("confined")
    if len(lines) == 1:
        return _one_variable(degrees, lines[0], couplings)
    free = [v for v in lines if not any(v in powers for terms in degrees.values() for powers, _, _ in terms)]
    if free:
        return Confinement(
            "flat", f"nothing confines {notation(Expression.of(free[0]))}: the potential does not depend on it"
        )
    return _many_variables(degrees, lines)


def _term(powers: dict[PathAtom, int], coefficient: Expression) -> Expression:
    for v, p in powers.items():
        coefficient = coefficient * Expression.of(v, p)
    return coefficient


def _one_variable(degrees: Degrees, line: PathAtom, couplings: Mapping[str, float]) -> Confinement:
    name = notation(Expression.of(line))
    if not degrees:
        return Confinement("flat", f"nothing confines {name}: the potential is flat, and the path drifts without end")
    top = max(degrees)
    _, expression, value = degrees[top][0]
    term = notation(expression * Expression.of(line, top))
    mentioned = sorted(s.name for s in expression.symbols if s.kind == "coupling")
    if top % 2:
        side = "-infinity" if value > 0 else "+infinity"
        return Confinement(
            "unbounded", f"the potential falls without limit along {name} -> {side} (leading term {term}, of odd power)"
        )
    if value < 0:
        where = ", ".join(f"{n} = {couplings[n]:g}" for n in mentioned)
        words = f"the potential falls without limit along {name} -> infinity (leading term {term}"
        words += f" with {where})" if where else ")"
        if len(mentioned) == 1 and len(expression.terms) == 1:
            power = dict(expression.terms[0][0]).get(Symbol("coupling", mentioned[0]), 0)
            if power % 2:
                good = "> 0" if expression.terms[0][1] > 0 else "< 0"
                words += f"; stable for {mentioned[0]} {good}"
        return Confinement("unbounded", words)
    return Confinement("confined")


def _many_variables(degrees: Degrees, lines: tuple[PathAtom, ...]) -> Confinement:
    """The leading form decides where it has a sign; where it vanishes, lower degrees and then curved valleys do."""
    import numpy as np

    ladder = sorted(degrees, reverse=True)
    top = ladder[0]
    scale = {d: sum(abs(c) for _, _, c in degrees[d]) for d in ladder}
    if top == 2:
        u, lowest = _lowest_of_quadratic(degrees[2], lines)
    else:
        u, lowest = lowest_on_sphere(lambda x: _form(degrees[top], lines, x), directions(len(lines)), 1.0)
    if lowest.min() < -ZERO_FORM * scale[top]:
        return _falling(lines, u[lowest.argmin()], top)
    zeros = u[lowest <= ZERO_FORM * scale[top]]
    if not len(zeros):
        return Confinement("confined")
    sharp = lowest[lowest <= ZERO_FORM * scale[top]] <= 1e-3 * ZERO_FORM * scale[top]
    zeros = zeros[sharp] if sharp.any() else zeros
    zeros = np.concatenate([zeros, -zeros])
    for d in ladder[1:]:
        values = _form(degrees[d], lines, zeros)
        if (values < -ZERO_BELOW * scale[d]).any():
            return _falling(lines, zeros[values.argmin()], d)
        zeros = zeros[values <= ZERO_BELOW * scale[d]]
        if not len(zeros):
            break
    if len(zeros):
        return Confinement(
            "flat",
            f"the potential is flat along the direction ({_named(lines, zeros[0])}): nothing confines the path there",
        )
    return Confinement("confined") if top == 2 else _valley(degrees, lines, scale)


def _falling(lines: tuple[PathAtom, ...], u: NDArray[np.float64], degree: int) -> Confinement:
    return Confinement(
        "unbounded",
        f"the potential falls without limit along the direction ({_named(lines, u)}); decided on its terms of degree "
        f"{degree}, over many directions",
    )


def _lowest_of_quadratic(terms: list, lines: tuple[PathAtom, ...]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Principal axes of a quadratic form, and its values on them: exact, in any number of variables."""
    import numpy as np

    matrix = np.zeros((len(lines), len(lines)))
    for powers, _, value in terms:
        places = [lines.index(v) for v, p in powers.items() for _ in range(p)]
        matrix[places[0], places[1]] += value / 2
        matrix[places[1], places[0]] += value / 2
    values, vectors = np.linalg.eigh(matrix)
    return vectors.T, values


def _form(terms: list, lines: tuple[PathAtom, ...], u: NDArray[np.float64]) -> NDArray[np.float64]:
    import numpy as np

    total = np.zeros(len(u))
    for powers, _, value in terms:
        term = np.full(len(u), value)
        for v, p in powers.items():
            term = term * u[:, lines.index(v)] ** p
        total += term
    return total


def _valley(degrees: Degrees, lines: tuple[PathAtom, ...], scale: Mapping[int, float]) -> Confinement:
    """Follows the minimum over spheres, as far out as rounding allows."""
    import numpy as np

    if len(lines) > MOST_SEARCHED:
        return Confinement(
            "undecided",
            f"its leading terms vanish in some direction, and {len(lines)} variables are too many to follow",
        )
    top = max(degrees)
    unit = max([1e-3, *((scale[d] / scale[top]) ** (1 / (top - d)) for d in scale if d < top)])
    radii = unit * 2.0 ** np.linspace(0, max(4, 40 // top), SPHERES)
    sizes = {d: [(powers, expression, abs(value)) for powers, expression, value in degrees[d]] for d in degrees}

    def height(x: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.asarray(sum(_form(terms, lines, x) for terms in degrees.values()))

    def rounding(x: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.asarray(ROUNDING * sum(_form(terms, lines, np.abs(x)) for terms in sizes.values()))

    return _judged(*along_valleys(height, rounding, len(lines), radii), lines, f"{radii[-1]:.2g}")


def _judged(course: str, u: NDArray[np.float64], lines: tuple[PathAtom, ...], distance: str) -> Confinement:
    how = f"decided numerically, along a curved valley that passes the direction ({_named(lines, u)}) at a distance of"
    match course:
        case "falls":
            return Confinement("unbounded", f"the potential falls without limit; {how} {distance}")
        case "levels":
            return Confinement("flat", f"the potential levels off; {how} {distance}")
    return Confinement("confined")


# --- everything else --------------------------------------------------------------------------------------------
def _far_out(land: Landscape) -> Confinement:
    """Numerically, at distances up to 1e6, for what is no polynomial of paths on the line."""
    import numpy as np

    if not land.lines:
        heights = land.lowest(np.zeros((1, 0)))
        if np.isnan(heights).all():
            return Confinement("meaningless", "it is no real number at any angle")
        return Confinement("confined")
    outwards = along_rays(land, inwards=False)
    words = "decided numerically, up to a distance of 1e6"
    for u, course in outwards:
        if course == "falls":
            along = _named(land.lines, u)
            return Confinement("unbounded", f"the potential falls without limit along ({along}); {words}")
    if all(course == "unknown" for _, course in outwards):
        return Confinement("meaningless", "it is no real number in any direction")
    for u, course in _steep_inwards(land):
        if course == "falls":
            return Confinement(
                "singular",
                f"the potential falls without limit towards the origin along ({_named(land.lines, u)}); decided "
                "numerically, down to a distance of 1e-6",
            )
    for u, course in outwards:
        if course == "levels":
            return Confinement("flat", f"the potential levels off along ({_named(land.lines, u)}); {words}")
    for u, course in outwards:
        if course == "unknown":
            return Confinement("undecided", f"the potential is not a number along ({_named(land.lines, u)})")
    if 1 < len(land.lines) <= MOST_SEARCHED:
        radii = 2.0 ** np.linspace(4, 12, SPHERES)
        found = along_valleys(land.lowest, land.rounding, len(land.lines), radii)
        return _judged(*found, land.lines, f"{radii[-1]:g}")
    return Confinement("confined")


def _steep_inwards(land: Landscape) -> list[tuple[NDArray[np.float64], str]]:
    """Directions in which V falls towards the origin like a power; a logarithm leaves exp(-a V) integrable."""
    near = 2.0**-20
    found = []
    for u, course in along_rays(land, inwards=True):
        inner, outer = land.lowest(near * u[None])[0], land.lowest(u[None])[0]
        if course == "falls" and inner < -1e3 * (1 + abs(outer)):
            found.append((u, course))
    return found
