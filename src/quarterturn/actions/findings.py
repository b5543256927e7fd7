"""What the turn found out about an action, in the trade's words; asked again at every change of couplings."""

from __future__ import annotations

from collections.abc import Mapping

from quarterturn.actions.boundedness import Confinement, confinement, value_at
from quarterturn.actions.circles import changed_by_a_turn
from quarterturn.actions.expression import ONE, ZERO, Atom, Expression, PathAtom, Symbol
from quarterturn.actions.model import EuclideanAction, Finding
from quarterturn.actions.printing import notation
from quarterturn.actions.turn import velocity


def check(euclidean: EuclideanAction, couplings: Mapping[str, float]) -> tuple[Finding, ...]:
    """Findings that depend on the values of the couplings: kinetic form, boundedness, confinement.

    severity "fatal": the path integral diverges; "unconfined": it diverges on a periodic lattice, though levels below
    the continuum may exist; "note": worth knowing.
    """
    found = [*_kinetic(euclidean, couplings), *_single_valued(euclidean, couplings)]
    verdict = _confined(euclidean, couplings)
    if verdict.verdict == "unbounded":
        found.append(Finding("fatal", "bounded", f"not bounded below: {verdict.words}"))
    elif verdict.verdict == "meaningless":
        found.append(Finding("fatal", "bounded", f"the potential has no value: {verdict.words}"))
    elif verdict.verdict == "singular":
        words = f"not bounded below: {verdict.words}; exp(-a V) can't be integrated there, at no spacing a"
        found.append(Finding("unconfined", "bounded", words))
    elif verdict.verdict == "flat":
        found.append(Finding("unconfined", "bounded", f"not confining: {verdict.words}"))
    elif verdict.verdict == "undecided":
        found.append(Finding("note", "bounded", f"boundedness is undecided: {verdict.words}"))
    return tuple(found)


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


def _kinetic(euclidean: EuclideanAction, couplings: Mapping[str, float]) -> list[Finding]:
    import numpy as np

    if euclidean.links:
        return []
    mass = np.array([[value_at(k, couplings) for k in row] for row in euclidean.mass])
    found = []
    if not np.isfinite(mass).all():
        return [Finding("fatal", "kinetic", "the mass in the kinetic term is not a finite number at these couplings")]
    for i, variable in enumerate(euclidean.variables):
        name = notation(Expression.of(variable))
        if mass[i, i] == 0:
            found.append(
                Finding("fatal", "kinetic", f"{name} has no kinetic term: L needs a term such as 1/2 {name}'^2")
            )
        elif mass[i, i] < 0:
            term = notation(Expression.number(1) * euclidean.mass[i][i] * Expression.of(velocity(variable), 2))
            found.append(
                Finding(
                    "fatal",
                    "kinetic",
                    f"kinetic form not positive: after the turn {name} has the kinetic term 1/2 ({term}), which is "
                    f"negative, so that exp(-S_E) grows with every wiggle of the path; L is kinetic minus potential "
                    f"energy, + 1/2 {name}'^2, and a change of the overall sign would mend it",
                )
            )
    if not found and np.linalg.eigvalsh(mass).min() <= 0:
        found.append(
            Finding(
                "fatal",
                "kinetic",
                "kinetic form not positive: a combination of the velocities has no, or a negative, mass",
            )
        )
    return found


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


def phase_finding(euclidean: EuclideanAction) -> tuple[Finding, ...]:
    """The imaginary part of the action, where there is one."""
    phase = euclidean.phase
    if phase is None:
        return ()
    return (
        Finding(
            "note",
            "phase",
            f"the weight is complex: L_E has the imaginary term i ({notation(phase)}); averages are taken by "
            "reweighting with the phase, whose average is measured first",
        ),
    )
