"""The canonical form of an action: notation that parses back to the same meaning, and its digest (SHA-256)."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable, Mapping

from quarterturn.actions.expression import Expression, PathAtom
from quarterturn.actions.model import Path, Source
from quarterturn.actions.printing import latex, notation

MEASURES = {1: r"d\tau", 2: r"d\tau\, dx", 3: r"d\tau\, d^2x", 4: r"d\tau\, d^3x"}


def canonical_text(
    paths: Mapping[str, Path],
    coordinates: tuple[str, ...],
    form: str,
    action: Expression,
    sources: Iterable[Source],
    units: tuple[str, ...] = (),
) -> str:
    """Degrees of freedom, sources, units and the action, one a line, in a fixed order."""
    lines = [_declared(path, coordinates) for path in paths.values()]
    given = [f"{s.name}({', '.join(s.coordinates)}) = {notation(s.body)}" for s in sources]
    named = [f"units {', '.join(units)}"] if units else []
    return "\n".join([*sorted(lines), *sorted(given), *named, f"{form} = {notation(action)}"])


def _declared(path: Path, coordinates: tuple[str, ...]) -> str:
    size = f"[{path.components}]" if path.components else ""
    start = f"{path.name}{size}({', '.join(coordinates)})"
    if path.kind == "complex":
        return f"{start} complex"
    if path.kind == "unit":
        return f"{start}, {path.name}.{path.name} = 1"
    return start + (f" mod {notation(path.period)}" if path.period is not None else "")


def digest(canonical: str) -> str:
    return hashlib.sha256(canonical.encode("utf-8")).hexdigest()


def typeset(form: str, action: Expression, dimension: int) -> str:
    """The action typeset, with its integral or its sum over the lattice."""
    if form == "SE":
        return rf"S_E = \sum_x \left[ {latex(action)} \right]"
    if form == "LE":
        upper = r"\int_0^\beta \! " if dimension == 1 else r"\int \! "
        return rf"S_E = {upper}{MEASURES[dimension]} \left[ {latex(action)} \right]"
    return rf"S = \int \! {MEASURES[dimension].replace(chr(92) + 'tau', 't')} \left[ {latex(action)} \right]"


def on_spheres(action: Expression, paths: Mapping[str, Path]) -> Expression:
    """The action with n.n = 1 used: even powers of the last component are written in the others.

    So n.n, (n.n)^2 and 1 are one meaning. Derivatives are left: n.n' vanishes with its square's derivative.
    """
    for path in (p for p in paths.values() if p.kind == "unit"):
        *others, last = path.atoms
        for place in dict.fromkeys(a.neighbour for a in action.paths if a.name == path.name and not a.order):
            action = _reduced(action, [_at(a, place) for a in others], _at(last, place))
    return action


def _at(atom: PathAtom, neighbour: int) -> PathAtom:
    return PathAtom(atom.name, atom.component, neighbour=neighbour, part=atom.part)


def _reduced(action: Expression, others: list[PathAtom], last: PathAtom) -> Expression:
    rest = Expression.number(1)
    for atom in others:
        rest = rest - Expression.of(atom, 2)
    total = Expression(())
    for monomial, coefficient in action.terms:
        power = next((p for a, p in monomial if a == last), 0)
        if power < 2:
            total = total + Expression(((monomial, coefficient),))
            continue
        kept = tuple((a, p % 2 if a == last else p) for a, p in monomial if a != last or p % 2)
        total = total + Expression(((kept, coefficient),)) * rest ** (power // 2)
    return total
