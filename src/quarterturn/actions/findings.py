"""What the turn found out about an action, in the trade's words; asked again at every change of couplings."""

from __future__ import annotations

from collections.abc import Callable, Mapping

from quarterturn.actions.boundedness import confinement
from quarterturn.actions.circles import changed_by_a_turn
from quarterturn.actions.confinement import Confinement, by_degree, is_polynomial
from quarterturn.actions.expression import ONE, ZERO, Atom, Expression, PathAtom, Symbol
from quarterturn.actions.kinetic import kinetic_findings
from quarterturn.actions.model import EuclideanAction, Finding
from quarterturn.actions.places import Places, is_no_polynomial, place
from quarterturn.actions.printing import notation
from quarterturn.errors import Span


def check(euclidean: EuclideanAction, couplings: Mapping[str, float], places: Places = ()) -> tuple[Finding, ...]:
    """Findings that depend on the values of the couplings: kinetic form, boundedness, confinement.

    severity "fatal": the path integral diverges; "unconfined": it diverges on a periodic lattice, though levels below
    the continuum may exist; "note": worth knowing. `places` are the terms as they were written, turned, with their
    spans in the cell: each finding gets that of the term which causes it.
    """
    found = [*kinetic_findings(euclidean, couplings, places), *_single_valued(euclidean, couplings)]
    verdict = _confined(euclidean, couplings)
    span = _cause(verdict, euclidean, couplings, places)
    if verdict.verdict == "unbounded":
        found.append(Finding("fatal", "bounded", f"not bounded below: {verdict.words}", span))
    elif verdict.verdict == "meaningless":
        found.append(Finding("fatal", "bounded", f"the potential has no value: {verdict.words}", span))
    elif verdict.verdict == "singular":
        words = f"not bounded below: {verdict.words}; exp(-a V) can't be integrated there, at no spacing a"
        found.append(Finding("unconfined", "bounded", words, span))
    elif verdict.verdict == "flat":
        found.append(Finding("unconfined", "bounded", f"not confining: {verdict.words}"))
    elif verdict.verdict == "undecided":
        found.append(Finding("note", "bounded", f"boundedness is undecided: {verdict.words}"))
    return tuple(found)


def _cause(
    verdict: Confinement, euclidean: EuclideanAction, couplings: Mapping[str, float], places: Places
) -> Span | None:
    """The term that drags the potential down: of the degree that decided, with a negative sign; else a function."""
    if verdict.verdict == "confined":
        return None
    if verdict.degree is None:
        return place(places, is_no_polynomial)

    def falls(term: Expression) -> bool:
        part = without_derivatives(term)
        leading = by_degree(part, couplings).get(verdict.degree or 0, []) if is_polynomial(part) else []
        return any(value < 0 or verdict.degree % 2 for _, _, value in leading)  # type: ignore[operator]

    return place(places, falls)


def _linear_in_time(variables: list[PathAtom]) -> Callable[[Expression], bool]:
    """Whether a term is linear in the velocity of one of these variables."""
    wanted = {v.derivative() for v in variables}
    return lambda term: any(
        sum(p for a, p in m if isinstance(a, PathAtom) and a.order) == 1 and any(a in wanted for a, _ in m)
        for m, _ in term.terms
    )


def without_derivatives(term: Expression) -> Expression:
    """The part of a term that stands in the potential."""
    return Expression(
        tuple((m, c) for m, c in term.terms if not any(p.order or p.neighbour for p in Expression(((m, c),)).paths))
    )


def _confined(euclidean: EuclideanAction, couplings: Mapping[str, float]) -> Confinement:
    """Whether the action holds every variable that is not compact; unit vectors and angles hold themselves.

    A lattice action is looked at on uniform and on staggered configurations, where its links are as low as they get.
    """
    on_spheres = {euclidean.variables[i] for group in euclidean.spheres for i in group}
    left = [(v, p) for v, p in zip(euclidean.variables, euclidean.periods, strict=True) if v not in on_spheres]
    if not left:
        return Confinement("confined")
    poles = {euclidean.variables[group[-1]] for group in euclidean.spheres}
    variables, periods = tuple(v for v, _ in left), tuple(p for _, p in left)
    found = Confinement("confined")
    for sign in (1, -1) if euclidean.links else (1,):
        whole = sum((_joined(link, sign) for link in euclidean.links), without_sources(euclidean.potential))
        whole = whole.substitute(lambda a: (ONE if a in poles else ZERO) if a in on_spheres else None)
        found = confinement(whole, variables, periods, couplings)
        if found.verdict != "confined":
            return found
    return found


def _joined(link: Expression, sign: int) -> Expression:
    """A link between two sites whose fields are equal, or opposite."""

    def value(atom: Atom) -> Expression | None:
        if not isinstance(atom, PathAtom) or not atom.neighbour:
            return None
        return Expression.of(atom.value).scaled(sign)

    return without_sources(link).substitute(value)


def without_sources(expression: Expression) -> Expression:
    """With every source at zero, where the integral has to converge already."""
    return expression.substitute(lambda a: ZERO if isinstance(a, Symbol) and a.kind == "source" else None)


def _single_valued(euclidean: EuclideanAction, couplings: Mapping[str, float]) -> list[Finding]:
    periods = dict(zip(euclidean.variables, euclidean.periods, strict=True))
    potential = without_sources(euclidean.potential)
    parts = [(potential, "the potential"), *((a, "the term linear in the velocity") for a in euclidean.drift)]
    for expression, words in parts:
        changed = changed_by_a_turn(expression, periods, couplings)
        if changed is not None:
            name, turn = notation(Expression.of(changed)), notation(periods[changed] or ZERO)
            message = (
                f"not single-valued: {name} and {name} + {turn} are the same point of the circle, but {words} differs "
                f"there; write it in cos and sin of whole turns, or declare {name}(t) without mod"
            )
            return [Finding("fatal", "period", message)]
    return []


def phase_finding(euclidean: EuclideanAction, places: Places = ()) -> tuple[Finding, ...]:
    """The imaginary part of the action, where there is one."""
    moving = [v for v, a in zip(euclidean.variables, euclidean.drift, strict=True) if a.terms]
    phase = euclidean.phase
    if phase is None:
        return ()
    return (
        Finding(
            "note",
            "phase",
            f"the weight is complex: L_E has the imaginary term i ({notation(phase)}); averages are taken by "
            "reweighting with the phase, whose average is measured first",
            place(places, _linear_in_time(moving)),
        ),
    )
