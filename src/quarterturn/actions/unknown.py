"""What to say about a name that nobody declared: the nearest meaning, and a repair where one is plausible."""

from __future__ import annotations

import difflib
from typing import TYPE_CHECKING

from quarterturn.errors import ActionError, Span
from quarterturn.notation.symbols import COMPLEX, FUNCTIONS, MEASURES
from quarterturn.notation.tree import Call, Name

if TYPE_CHECKING:
    from quarterturn.actions.scope import Scope

PYTHON_MODULES = frozenset({"np", "numpy", "math", "jnp", "scipy", "sp"})


def closest(scope: Scope, node: Name) -> ActionError:
    """The complaint about an unknown name."""
    return _special(scope, node) or _misspelt(scope, node)


def applied_to_nothing(scope: Scope, node: Call) -> ActionError:
    """The complaint about a call of what is no function in an action."""
    if node.name in MEASURES:
        return scope.error(f"{node.name}(…) is a measurement and belongs after 'measure'", node.span)
    return scope.error(f"{node.name}(…) has no meaning here", node.span)


def refuse_other_places(scope: Scope, node: Call) -> None:
    """In an action a field stands at the point (t, x): a number in its bracket would be lost."""
    written = tuple(a.name if isinstance(a, Name) else "" for a in node.arguments)
    if scope.average is None and written != scope.coordinates:
        place = f"{node.name}({', '.join(scope.coordinates)})"
        words = f"in an action {node.name} is taken at {place}, and its bracket holds nothing else"
        raise scope.error(words, node.span, node.name)


def _special(scope: Scope, node: Name) -> ActionError | None:
    name, first = node.name, next(iter(scope.paths), "q")
    if name in FUNCTIONS and follows(scope.text, node.span).startswith(("^", "²", "³")):
        return scope.error(f"a power stands behind the whole function, as in {name}(x)^2", node.span, f"{name}(…)^2")
    if name in FUNCTIONS or name in COMPLEX:
        return scope.error(f"{name} is a function and needs its argument in brackets", node.span, f"{name}(…)")
    if name in MEASURES:
        return scope.error(f"{name} needs its argument, as in {MEASURES[name].rsplit(': ', 1)[-1]}", node.span)
    if name in scope.coordinates or name == "t":
        words = f"{name} stands in sources only: define J({name}) = … and couple it, as in J {first}"
        return scope.error(words, node.span)
    if name in ("i", "I", "j"):
        return scope.error(
            "the action is written in real time and has no i: the turn to imaginary time adds it", node.span
        )
    if name == "hbar":
        return scope.error("hbar = 1 in the units of this notation: leave it out", node.span)
    velocities = _derivatives(scope)
    if name in velocities:
        path = velocities[name]
        words = f"{name} is not declared; the derivative in time is {path}' or d_t {path}"
        return scope.error(words, node.span, f"{path}'")
    if name == "d" or name.startswith("d_"):
        words = f"a derivative stands before its field, as in d_t {first}, or (d {first})^2 for all of them"
        return scope.error(words, node.span)
    if name in PYTHON_MODULES:
        return scope.error(f"{name} is a module of Python; functions stand alone, as in cosh(q)", node.span)
    return None


def _misspelt(scope: Scope, node: Name) -> ActionError:
    name = node.name
    known = [*scope.paths, *scope.momenta, *scope.couplings, *scope.definitions, *scope.tensors, *scope.sources,
             *scope.geometry]  # fmt: skip
    applied = next((f for f in FUNCTIONS if name.startswith(f) and name[len(f) :] in known), None)
    if applied:
        inner = name[len(applied) :]
        return scope.error(f"{name} is not declared; a function has brackets", node.span, f"{applied}({inner})")
    split = next((f"{name[:i]} {name[i:]}" for i in range(1, len(name)) if name[:i] in known and name[i:] in known), "")
    if split:
        return scope.error(f"{name} is not declared; a product needs a space between its factors", node.span, split)
    near = difflib.get_close_matches(name, known, n=1, cutoff=0.6)
    if near:
        return scope.error(f"{name} is not declared; there is {near[0]}", node.span, near[0])
    if follows(scope.text, node.span).startswith("("):
        functions = ", ".join(FUNCTIONS)
        return scope.error(f"{name} is no function of the notation; there are {functions}", node.span)
    return scope.error(
        f"{name} is not declared: a coupling needs a value, such as {name} = 1", node.span, f"{name} = 1"
    )


def _derivatives(scope: Scope) -> dict[str, str]:
    """Other ways to write a velocity, and of which path: dq, qdot, q_dot, dt."""
    table = {word: path for path in scope.paths for word in (f"d{path}", f"{path}dot", f"{path}_dot", f"{path}_t")}
    return table | dict.fromkeys(("dt",), next(iter(scope.paths), "q"))


def follows(text: str, span: Span) -> str:
    """The rest of the line behind a place."""
    return text.split("\n")[span.end_line - 1][span.end_column - 1 :]
