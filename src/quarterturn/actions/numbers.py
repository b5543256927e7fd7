"""Formulas of numbers only: values of couplings, periods, spacings."""

from __future__ import annotations

import cmath
import math
from collections.abc import Callable

from quarterturn.actions.scope import Scope
from quarterturn.notation.tree import Node


def constant_value(scope: Scope, node: Node, what: str) -> float:
    """The value of a formula of numbers only. Raises ActionError naming `what`."""
    expression = scope.number(node)
    if expression.paths or any(s.kind != "constant" for s in expression.symbols):
        raise scope.error(f"{what} must be a number, without paths and couplings", node.span)
    try:
        value = complex(expression.evaluate({}, _MATH))
    except (ValueError, OverflowError, ZeroDivisionError):
        value = complex("nan")
    if value.imag or not cmath.isfinite(value):
        raise scope.error(f"{what} is no finite real number", node.span)
    return value.real


class _Math:
    """Functions of numbers for `Expression.evaluate`, without NumPy."""

    pi = math.pi

    def __getattr__(self, name: str) -> Callable[[float], float]:
        return abs if name == "abs" else getattr(math, name)


_MATH = _Math()
