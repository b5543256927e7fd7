"""Does the potential confine? Decided on its leading terms where it is a polynomial, along rays otherwise.

The couplings are numbers here: the answer belongs to one choice of them and is asked again at every rerun.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from quarterturn.actions.expression import Atom, Expression, PathAtom, Symbol
from quarterturn.actions.printing import notation

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

DIRECTIONS = 400
FLAT = 1e-12


@dataclass(frozen=True)
class Confinement:
    """verdict: confined | unbounded | flat | undecided; `words` say along which direction and how it was decided."""

    verdict: str
    words: str = ""


def confinement(
    potential: Expression, variables: tuple[PathAtom, ...], circles: tuple[bool, ...], couplings: Mapping[str, float]
) -> Confinement:
    """Whether V grows in every direction of the variables that live on the line."""
    lines = tuple(v for v, circle in zip(variables, circles, strict=True) if not circle)
    if not lines:
        return Confinement("confined")
    if is_polynomial(potential) and not potential.paths - set(lines):
        return _polynomial(potential, lines, couplings)
    return _along_rays(potential, variables, lines, couplings)


def is_polynomial(potential: Expression) -> bool:
    """A polynomial in the paths."""
    return all(
        (isinstance(atom, PathAtom) and power > 0) or not Expression.of(atom).paths
        for monomial, _ in potential.terms
        for atom, power in monomial
    )


def _value(expression: Expression, couplings: Mapping[str, float]) -> float:
    import numpy as np

    lookup: dict[Atom, float] = {Symbol("coupling", n): v for n, v in couplings.items()}
    with np.errstate(all="ignore"):
        return float(np.real(expression.evaluate(lookup, np)))


def by_degree(
    potential: Expression, couplings: Mapping[str, float]
) -> dict[int, list[tuple[dict[PathAtom, int], Expression, float]]]:
    """Terms with equal powers of the paths collected, with their numerical coefficients, by total degree."""
    collected: dict[tuple[tuple[PathAtom, int], ...], Expression] = {}
    for monomial, coefficient in potential.terms:
        powers = tuple((a, p) for a, p in monomial if isinstance(a, PathAtom))
        rest = Expression(((tuple((a, p) for a, p in monomial if not isinstance(a, PathAtom)), coefficient),))
        collected[powers] = collected[powers] + rest if powers in collected else rest
    result: dict[int, list[tuple[dict[PathAtom, int], Expression, float]]] = {}
    for powers, expression in collected.items():
        value = _value(expression, couplings)
        if value != 0:
            result.setdefault(sum(p for _, p in powers), []).append((dict(powers), expression, value))
    return result


def _polynomial(potential: Expression, lines: tuple[PathAtom, ...], couplings: Mapping[str, float]) -> Confinement:
    degrees = by_degree(potential, couplings)
    degrees.pop(0, None)
    if len(lines) == 1:
        return _one_variable(degrees, lines[0], couplings)
    free = [v for v in lines if not any(v in powers for terms in degrees.values() for powers, _, _ in terms)]
    if free:
        return Confinement(
            "flat", f"nothing confines {notation(Expression.of(free[0]))}: the potential does not depend on it"
        )
    return _many_variables(degrees, lines)


def _one_variable(degrees: dict, line: PathAtom, couplings: Mapping[str, float]) -> Confinement:
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


def _many_variables(degrees: dict, lines: tuple[PathAtom, ...]) -> Confinement:
    """Along rays r u the highest degree that does not vanish decides; u runs over many directions and is refined."""
    import numpy as np

    generator = np.random.default_rng(20240229)
    directions = generator.normal(size=(DIRECTIONS, len(lines)))
    axes = [np.array(v, dtype=float) for v in _small_directions(len(lines))]
    directions = np.concatenate([directions, np.array(axes), -np.array(axes)])
    directions /= np.linalg.norm(directions, axis=1, keepdims=True)
    ladder = sorted(degrees, reverse=True)
    scale = {d: sum(abs(c) for _, _, c in degrees[d]) for d in ladder}
    worst = directions[np.argmin(_form(degrees[ladder[0]], lines, directions))]
    candidates = np.concatenate([directions, _refined(degrees[ladder[0]], lines, worst)[None]])
    undecided = np.ones(len(candidates), dtype=bool)
    for d in ladder:
        values = _form(degrees[d], lines, candidates)
        falling = undecided & (values < -1e-9 * scale[d])
        if falling.any():
            u = candidates[np.argmin(np.where(falling, values, np.inf))]
            arrow = ", ".join(f"{notation(Expression.of(v))}: {x:.2g}" for v, x in zip(lines, u, strict=True))
            return Confinement(
                "unbounded",
                f"the potential falls without limit along the direction ({arrow}); decided on its terms of degree {d}, "
                "over many directions",
            )
        undecided &= values < 1e-9 * scale[d]
    if undecided.any():
        u = candidates[np.flatnonzero(undecided)[0]]
        arrow = ", ".join(f"{notation(Expression.of(v))}: {x:.2g}" for v, x in zip(lines, u, strict=True))
        return Confinement(
            "flat", f"the potential is flat along the direction ({arrow}): nothing confines the path there"
        )
    return Confinement("confined")


def _small_directions(size: int) -> list[list[int]]:
    found = []
    for i in range(size):
        found.append([int(k == i) for k in range(size)])
        for j in range(i):
            found += [[int(k == i) + s * int(k == j) for k in range(size)] for s in (1, -1)]
    return found


def _form(terms: list, lines: tuple[PathAtom, ...], u: NDArray[np.float64]) -> NDArray[np.float64]:
    import numpy as np

    total = np.zeros(len(u))
    for powers, _, value in terms:
        term = np.full(len(u), value)
        for v, p in powers.items():
            term = term * u[:, lines.index(v)] ** p
        total += term
    return total


def _refined(terms: list, lines: tuple[PathAtom, ...], start: NDArray[np.float64]) -> NDArray[np.float64]:
    import numpy as np
    from scipy.optimize import minimize

    def objective(u: NDArray[np.float64]) -> float:
        return float(_form(terms, lines, (u / np.linalg.norm(u))[None])[0])

    found = minimize(objective, start, method="Nelder-Mead", options={"maxiter": 400})
    return np.asarray(found.x / np.linalg.norm(found.x))


def _along_rays(
    potential: Expression, variables: tuple[PathAtom, ...], lines: tuple[PathAtom, ...], couplings: Mapping[str, float]
) -> Confinement:
    """Numerically, at distances up to 1e6, for what is no polynomial."""
    import numpy as np

    lookup: dict[Atom, object] = {Symbol("coupling", n): v for n, v in couplings.items()}
    flat = ""
    for u in [*_small_directions(len(lines)), *([-x for x in d] for d in _small_directions(len(lines)))]:
        r = np.concatenate([np.linspace(0.05, 1, 20), np.logspace(0, 6, 61)])
        values: dict[Atom, object] = {**lookup, **{v: np.full_like(r, 0.3) for v in variables}}
        for v, x in zip(lines, u, strict=True):
            values[v] = r * x
        with np.errstate(all="ignore"):
            height = np.broadcast_to(np.asarray(potential.evaluate(values, np), dtype=float), r.shape)
        finite = height[np.isfinite(height)]
        arrow = ", ".join(f"{notation(Expression.of(a))}: {x:g}" for a, x in zip(lines, u, strict=True))
        if not len(finite):
            return Confinement("undecided", f"the potential is not a number along ({arrow})")
        if np.isneginf(height[-1]) or (
            finite[-1] < finite.min() + 1e-9 and finite[-1] < -1e3 * (1 + np.abs(finite[:20]).max())
        ):
            return Confinement(
                "unbounded",
                f"the potential falls without limit along ({arrow}); decided numerically, up to a distance of 1e6",
            )
        tail = height[-10:]
        if np.isfinite(tail).all() and np.ptp(tail) <= 1e-6 * max(1.0, float(np.abs(tail).max())):
            flat = flat or f"the potential levels off along ({arrow}); decided numerically, up to a distance of 1e6"
    return Confinement("flat", flat) if flat else Confinement("confined")
