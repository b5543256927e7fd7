"""Mass dimensions of couplings in 0+1 dimensions, hbar = 1: the action is a pure number and time has dimension -1.

Each term of L_E has dimension 1. Where the kinetic term has no coupling, the path has dimension -1/2; the rest follows
from the linear equations, as far as they determine it (common practice).
"""

from __future__ import annotations

from fractions import Fraction

from quarterturn.actions.expression import Expression, Function, PathAtom, Power, Symbol


def coupling_dimensions(lagrangian: Expression, angles: frozenset[str] = frozenset()) -> dict[str, Fraction | None]:
    """Dimension of each coupling in powers of mass; None where the terms do not determine it. Angles have none.

    Terms that contradict each other, as 1/2 q'^2 + 1/2 q^2 do, are written in units in which some scale is 1; then no
    coupling has a dimension that could be told.
    """
    equations: list[tuple[dict[str, Fraction], Fraction]] = []
    names: set[str] = set()
    for monomial, _ in lagrangian.terms:
        row: dict[str, Fraction] = {}
        right = Fraction(1)
        for atom, power in monomial:
            if isinstance(atom, PathAtom):
                if atom.name not in angles:
                    row[f"path {atom.name}"] = row.get(f"path {atom.name}", Fraction(0)) + power
                right -= atom.order * power
            elif isinstance(atom, Symbol) and atom.kind == "coupling":
                row[atom.name] = row.get(atom.name, Fraction(0)) + power
                names.add(atom.name)
            elif isinstance(atom, (Function, Power)):
                _inside(atom, names)
                if isinstance(atom, Power):
                    right = Fraction(-(10**9))  # a power of a sum is not followed
        if right > -(10**8):
            equations.append((row, right))
    solved = _solve(equations)
    return {n: solved.get(n) for n in names}


def _inside(atom: Function | Power, names: set[str]) -> None:
    inner = atom.argument if isinstance(atom, Function) else atom.base
    names |= {s.name for s in inner.symbols if s.kind == "coupling"}


def _solve(equations: list[tuple[dict[str, Fraction], Fraction]]) -> dict[str, Fraction]:
    """Gauss-Jordan elimination over the rationals; the unknowns that are determined, none if there is no solution."""
    unknowns = sorted({n for row, _ in equations for n in row})
    rows = [([row.get(n, Fraction(0)) for n in unknowns], right) for row, right in equations]
    done = 0
    pivots: dict[int, int] = {}
    for column in range(len(unknowns)):
        k = next((i for i in range(done, len(rows)) if rows[i][0][column]), None)
        if k is None:
            continue
        rows[done], rows[k] = rows[k], rows[done]
        lead = rows[done][0][column]
        rows[done] = ([v / lead for v in rows[done][0]], rows[done][1] / lead)
        for i in range(len(rows)):
            factor = rows[i][0][column]
            if i != done and factor:
                rows[i] = (
                    [a - factor * b for a, b in zip(rows[i][0], rows[done][0], strict=True)],
                    rows[i][1] - factor * rows[done][1],
                )
        pivots[column] = done
        done += 1
    if any(right for _, right in rows[done:]):
        return {}
    free = {c for c in range(len(unknowns)) if c not in pivots}
    return {unknowns[c]: rows[r][1] for c, r in pivots.items() if not any(rows[r][0][f] for f in free)}
