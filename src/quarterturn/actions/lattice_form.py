"""A lattice action per site, SE, sorted into what stands on a site and what joins it to the next one.

The sum over sites is invariant under translations, so that phi phi(-x) and phi phi(+x) are one term, and phi(+x)^2 is
phi^2.
"""

from __future__ import annotations

from quarterturn.actions.expression import ZERO, Atom, Expression, PathAtom
from quarterturn.errors import ActionError


def sorted_links(action: Expression, dimension: int) -> tuple[Expression, tuple[Expression, ...]]:
    """The part on a site, and the links to the next site in each direction, time first.

    Raises ActionError for terms with derivatives, or that reach further than one site.
    """
    onsite = ZERO
    links = [ZERO] * dimension
    if any(p.order for p in action.paths):
        raise ActionError("a derivative in SE: a lattice action is written in phi and its neighbours phi(+mu)")
    for term in action.terms:
        whole = Expression((term,))
        places = {p.neighbour for p in whole.paths}
        away = places - {0}
        if not away:
            onsite = onsite + whole
            continue
        if len(away) > 1:
            raise ActionError("a term that joins more than two sites: only nearest neighbours are available")
        place = away.pop()
        if 0 not in places:
            onsite = onsite + whole.substitute(lambda a: Expression.of(a.value) if isinstance(a, PathAtom) else None)
            continue
        direction = abs(place) - 1
        links[direction] = links[direction] + (whole if place > 0 else _forwards(whole, direction))
    return onsite, tuple(links)


def _forwards(term: Expression, direction: int) -> Expression:
    """phi phi(-x) moved by one site."""

    def step(atom: Atom) -> Expression | None:
        if not isinstance(atom, PathAtom):
            return None
        return Expression.of(atom.value if atom.neighbour else atom.moved(direction))

    return term.substitute(step)


def joined(onsite: Expression, links: tuple[Expression, ...]) -> Expression:
    """The action per site as one expression."""
    return sum(links, onsite)
