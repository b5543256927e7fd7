"""Remarks on how an action is written, which do not depend on the values of its couplings."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from quarterturn.actions.canonical import on_spheres
from quarterturn.actions.dimensions import contradiction
from quarterturn.actions.expression import Expression
from quarterturn.actions.model import EuclideanAction, Finding, Path
from quarterturn.actions.places import Places, holds_powers, place, powers_of
from quarterturn.actions.printing import notation
from quarterturn.units.system import System


def contradicting_terms(
    whole: Expression, euclidean: EuclideanAction, paths: Mapping[str, Path], system: System, places: Places
) -> tuple[Finding, ...]:
    """Two terms that no dimensions of the couplings bring together; plain numbers alone are taken as they are."""
    if system.laboratory or euclidean.links or not any(s.kind == "coupling" for s in whole.symbols):
        return ()
    pure = frozenset(name for name, path in paths.items() if path.period is not None or path.kind == "unit")
    found = contradiction(whole, euclidean.dimension, pure)
    if found is None:
        return ()
    first, second = (notation(Expression((term,))) for term in found)
    words = (
        f"the terms {first} and {second} of L_E have different dimensions, whatever the couplings count: the action is "
        "read as written in units in which some scale is 1, and no dimension is told"
    )
    monomial = found[1][0]
    return (Finding("note", "dimensions", words, place(places, holds_powers([powers_of(monomial)]))),)


def without_length(written: Expression, paths: Mapping[str, Path]) -> Iterator[Finding]:
    """A potential that speaks of the length of a unit vector says nothing."""
    reduced = on_spheres(written, paths)
    for path in (p for p in paths.values() if p.kind == "unit"):
        names = {a.name for a in written.paths if not a.order}
        if path.name in names and path.name not in {a.name for a in reduced.paths if not a.order}:
            words = f"the potential knows {path.name} through {path.name}.{path.name} only, which is 1: it drops out"
            yield Finding("note", "constraint", words)
