"""Does the potential confine? Decided on its leading terms where it is a polynomial, on numbers far out otherwise.

The couplings are numbers here: the answer belongs to one choice of them and is asked again at every rerun.
"""

from __future__ import annotations

from collections.abc import Mapping
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
from quarterturn.actions.confinement import Confinement, Degrees, by_degree, form_at, is_polynomial, named, value_at
from quarterturn.actions.expression import Expression, PathAtom, Symbol
from quarterturn.actions.leading_form import decided_exactly
from quarterturn.actions.printing import notation
from quarterturn.actions.stability import radial

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

SPHERES = 5
ZERO_FORM = 1e-9  # of the sum of its coefficients: a leading form below it counts as zero
ZERO_BELOW = 1e-5  # the same for lower degrees, which feel the error of the direction, up to the root of ZERO_FORM


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
    if len(lines) > 1:
        potential, lines, radii = _by_radius(potential, lines)
        degrees = by_degree(potential, couplings)
        degrees.pop(0, None)
    else:
        radii = {}
    if len(lines) == 1:
        return _one_variable(degrees, lines[0], couplings, radii.get(lines[0]))
    free = [v for v in lines if not any(v in powers for terms in degrees.values() for powers, _, _ in terms)]
    if free:
        return Confinement(
            "flat", f"nothing confines {notation(Expression.of(free[0]))}: the potential does not depend on it"
        )
    return decided_exactly(degrees, lines, couplings) or _many_variables(degrees, lines)


def _by_radius(
    potential: Expression, lines: tuple[PathAtom, ...]
) -> tuple[Expression, tuple[PathAtom, ...], dict[PathAtom, str]]:
    """Vectors and complex fields that enter through their length only, replaced by their first component."""
    kept: list[PathAtom] = []
    radii: dict[PathAtom, str] = {}
    for name in dict.fromkeys(v.name for v in lines):
        group = [v for v in lines if v.name == name]
        reduced = radial(potential, group) if len(group) > 1 else None
        if reduced is None:
            kept += group
            continue
        potential = reduced
        kept.append(group[0])
        radii[group[0]] = f"|{name}|"
    return potential, tuple(kept), radii


def _term(powers: dict[PathAtom, int], coefficient: Expression) -> Expression:
    for v, p in powers.items():
        coefficient = coefficient * Expression.of(v, p)
    return coefficient


def _one_variable(
    degrees: Degrees, line: PathAtom, couplings: Mapping[str, float], radius: str | None = None
) -> Confinement:
    name = radius or notation(Expression.of(line))
    if not degrees:
        return Confinement("flat", f"nothing confines {name}: the potential is flat, and the path drifts without end")
    top = max(degrees)
    _, expression, value = degrees[top][0]
    term = f"{notation(expression)} {name}^{top}" if radius else notation(expression * Expression.of(line, top))
    mentioned = sorted(s.name for s in expression.symbols if s.kind == "coupling")
    if top % 2:
        side = "-infinity" if value > 0 else "+infinity"
        return Confinement(
            "unbounded",
            f"the potential falls without limit along {name} -> {side} (leading term {term}, of odd power)",
            top,
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
        return Confinement("unbounded", words, top)
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
        u, lowest = lowest_on_sphere(lambda x: form_at(degrees[top], lines, x), directions(len(lines)), 1.0)
    if lowest.min() < -ZERO_FORM * scale[top]:
        return _falling(lines, u[lowest.argmin()], top)
    zeros = u[lowest <= ZERO_FORM * scale[top]]
    if not len(zeros):
        return Confinement("confined")
    sharp = lowest[lowest <= ZERO_FORM * scale[top]] <= 1e-3 * ZERO_FORM * scale[top]
    zeros = zeros[sharp] if sharp.any() else zeros
    zeros = np.concatenate([zeros, -zeros])
    for d in ladder[1:]:
        values = form_at(degrees[d], lines, zeros)
        if (values < -ZERO_BELOW * scale[d]).any():
            return _falling(lines, zeros[values.argmin()], d)
        zeros = zeros[values <= ZERO_BELOW * scale[d]]
        if not len(zeros):
            break
    if len(zeros):
        return Confinement(
            "flat",
            f"the potential is flat along the direction ({named(lines, zeros[0])}): nothing confines the path there",
        )
    return Confinement("confined") if top == 2 else _valley(degrees, lines, scale)


def _falling(lines: tuple[PathAtom, ...], u: NDArray[np.float64], degree: int) -> Confinement:
    return Confinement(
        "unbounded",
        f"the potential falls without limit along the direction ({named(lines, u)}); decided numerically on its terms "
        f"of degree {degree}, over many directions",
        degree,
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
        return np.asarray(sum(form_at(terms, lines, x) for terms in degrees.values()))

    def rounding(x: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.asarray(ROUNDING * sum(form_at(terms, lines, np.abs(x)) for terms in sizes.values()))

    return _judged(*along_valleys(height, rounding, len(lines), radii), lines, f"{radii[-1]:.2g}")


def _judged(course: str, u: NDArray[np.float64], lines: tuple[PathAtom, ...], distance: str) -> Confinement:
    how = f"decided numerically, along a curved valley that passes the direction ({named(lines, u)}) at a distance of"
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
            along = named(land.lines, u)
            return Confinement("unbounded", f"the potential falls without limit along ({along}); {words}")
    if all(course == "unknown" for _, course in outwards):
        return Confinement("meaningless", "it is no real number in any direction")
    for u, course in _steep_inwards(land):
        if course == "falls":
            return Confinement(
                "singular",
                f"the potential falls without limit towards the origin along ({named(land.lines, u)}); decided "
                "numerically, down to a distance of 1e-6",
            )
    for u, course in outwards:
        if course == "levels":
            return Confinement("flat", f"the potential levels off along ({named(land.lines, u)}); {words}")
    for u, course in outwards:
        if course == "unknown":
            return Confinement("undecided", f"the potential is not a number along ({named(land.lines, u)})")
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
