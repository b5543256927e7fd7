"""The quarter turn step by step, for whoever wants to follow each sign."""

from __future__ import annotations

from dataclasses import dataclass

from quarterturn.actions.expression import IMAGINARY, Expression, PathAtom
from quarterturn.actions.model import Action
from quarterturn.actions.printing import latex, notation


@dataclass(frozen=True, slots=True)
class Step:
    """One step: what is done, and what stands there after it, in notation and typeset."""

    words: str
    notation: str
    latex: str


def turn_steps(action: Action) -> tuple[Step, ...]:
    """From the action as read to the weight of the path integral."""
    if action.form == "SE":
        return (_step("the lattice action per site, taken as it stands; the weight is exp(-S_E)", "S_E",
                      action.lagrangian),)  # fmt: skip
    if action.form == "LE":
        return (_step("the Euclidean Lagrangian, taken as it stands; the weight is exp(-S_E)", "L_E",
                      action.lagrangian),)  # fmt: skip
    turned = action.lagrangian.substitute(_quarter)
    dropped = -turned
    measure = "dt" if len(action.coordinates) == 1 else "d^Dx"
    found = [
        _step(_as_read(action), "L", action.lagrangian),
        _step(
            "the quarter turn t = -i tau: each derivative in time becomes i times one in tau, squares change sign, "
            "odd powers become imaginary; space, sources and couplings stay as they are", "L", turned,
        ),
        _step(
            f"exp(i S) = exp(i (-i) int {measure} L) = exp(-S_E), so that L_E = -L; here derivatives are in tau", "L_E",
            dropped,
        ),
    ]  # fmt: skip
    whole = -_without_dropped(action)
    if action.system.laboratory:
        found.append(_step(_in_units(action), "L_E", -whole))
    elif whole != turned:
        found.append(_step("what is a total derivative drops out between periodic ends", "L_E", -whole))
    return tuple(found)


def _without_dropped(action: Action) -> Expression:
    from quarterturn.actions.declare import whole_action

    return whole_action(action.euclidean)


def _in_units(action: Action) -> str:
    """The seam of `units.system`, and the total derivatives that drop out on the way."""
    unit = action.system.quantity(action.system.step).name
    if action.system.seam[2]:
        return f"the weight is exp(-S_E / hbar), written as exp(-S_E) with hbar divided out; tau in {unit}"
    return f"the weight is exp(-S_E / hbar); tau becomes an inverse energy, tau / hbar, in {unit}, so that V stays"


def _as_read(action: Action) -> str:
    if len(action.coordinates) == 1:
        return "the Lagrangian in real time, weight exp(i S)"
    sign = "mostly minus" if action.metric.startswith("+") else "mostly plus"
    squares = " ".join(f"{s} (d_{c} phi)^2" for s, c in zip(action.metric, action.coordinates, strict=True))
    return (
        f"the Lagrangian in real time, weight exp(i S), contracted with the metric {action.metric} ({sign}): "
        f"d_mu phi d^mu phi = {squares.removeprefix('+ ')}"
    )


def _quarter(atom: object) -> Expression | None:
    if isinstance(atom, PathAtom) and atom.order and atom.direction == 0:
        return Expression.of(IMAGINARY) * Expression.of(atom)
    return None


def _step(words: str, name: str, expression: Expression) -> Step:
    return Step(words, f"{name} = {notation(expression)}", f"{name} = {latex(expression)}")
