"""Whether the terms with derivatives are positive after the turn, in time and in each direction of space."""

from __future__ import annotations

from collections.abc import Mapping

from quarterturn.actions.confinement import value_at
from quarterturn.actions.expression import Expression, PathAtom
from quarterturn.actions.model import EuclideanAction, Finding
from quarterturn.actions.places import Places, holds_derivative, place
from quarterturn.actions.printing import notation

NO_NUMBER = "the mass in the kinetic term is not a finite number at these couplings"


def kinetic_findings(euclidean: EuclideanAction, couplings: Mapping[str, float], places: Places) -> list[Finding]:
    """Fatal where a kinetic form is not positive: which field, which direction, and what would mend it."""
    import numpy as np

    if euclidean.links:
        return []
    forms = [
        np.array([[value_at(k, couplings) for k in row] for row in matrix])
        for matrix in (euclidean.mass, *euclidean.stiffness)
    ]
    found: list[Finding] = []
    for k, form in enumerate(forms):
        if not np.isfinite(form).all():
            span = place(places, holds_derivative(euclidean.variables, k))
            return [Finding("fatal", "kinetic", NO_NUMBER, span)]
    for i, variable in enumerate(euclidean.variables):
        words, k = _of_variable(euclidean, variable, [float(form[i, i]) for form in forms])
        if words:
            span = place(places, holds_derivative([variable], k))
            severity = "note" if words.startswith("nothing joins") else "fatal"
            found.append(Finding(severity, "kinetic", words, span))
    for k, form in enumerate(forms):
        if not found and np.linalg.eigvalsh(form).min() <= 0:
            what = "velocities" if k == 0 else f"derivatives in {euclidean.coordinates[k]}"
            words = f"kinetic form not positive: a combination of the {what} has no, or a negative, mass"
            found.append(Finding("fatal", "kinetic", words, place(places, holds_derivative(euclidean.variables, k))))
    return _once(found)


def _of_variable(euclidean: EuclideanAction, variable: PathAtom, values: list[float]) -> tuple[str, int]:
    """What is wrong with the derivatives of one variable, and in which direction; nothing where all are positive."""
    name = notation(Expression.of(variable))
    time, space = values[0], values[1:]
    if time == 0:
        return f"{name} has no kinetic term: L needs a term such as 1/2 {name}'^2", 0
    if time < 0 and space and max(space) < 0:
        covariant = "(d phi)^2" if len(euclidean.variables) > 1 else f"(d {name})^2"
        return (
            f"kinetic form not positive: after the turn every derivative of {name} enters with a minus, so that "
            f"exp(-S_E) grows with every wiggle of the field; L has the sign that belongs to the other signature, in "
            f"which {covariant} is its own negative: declare that metric, or change the sign of the term", 0,
        )  # fmt: skip
    if time < 0:
        term = notation(euclidean.mass[_index(euclidean, variable)][_index(euclidean, variable)]
                        * Expression.of(variable.derivative(), 2))  # fmt: skip
        return (
            f"kinetic form not positive: after the turn {name} has the kinetic term 1/2 ({term}), which is negative, "
            "so that exp(-S_E) grows with every wiggle of the path; L is kinetic minus potential energy, "
            f"+ 1/2 {name}'^2, and a change of the overall sign would mend it", 0,
        )  # fmt: skip
    for k, value in enumerate(space, start=1):
        x = euclidean.coordinates[k]
        if value < 0:
            return (
                f"kinetic form not positive: in L the gradient energy stands with a minus, - 1/2 (d_{x} {name})^2, as "
                f"in (d {name})^2 with the metric; here it has the sign of the time derivative, so that exp(-S_E) "
                f"grows with every wiggle along {x}", k,
            )  # fmt: skip
        if value == 0:
            return f"nothing joins the values of {name} along {x}: L has no derivative d_{x} {name}", k
    return "", 0


def _index(euclidean: EuclideanAction, variable: PathAtom) -> int:
    return euclidean.variables.index(variable)


def _once(found: list[Finding]) -> list[Finding]:
    """Components of one field say the same: the first of each field is enough."""
    kept: dict[str, Finding] = {}
    for f in found:
        kept.setdefault("".join(c for c in f.message if not c.isdigit()), f)
    return list(kept.values())
