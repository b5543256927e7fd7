"""From the turned action to a system that split operators propagate: potential, gradient, masses, periods, flux."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from quarterturn.actions.expression import Atom, Expression
from quarterturn.actions.model import EuclideanAction
from quarterturn.errors import SpectrumError
from quarterturn.imaginary.binding import coupling_values
from quarterturn.imaginary.propagation import Floats, OfPoints, System

MOST_DEGREES = 2


def system_of(euclidean: EuclideanAction, couplings: Mapping[str, float]) -> System:
    """The system of one or two degrees of freedom; the gradient is exact, by symbolic differentiation.

    Raises
    ------
    SpectrumError
        More degrees of freedom, a field, a constraint, a source, or a drift that depends on the path.
    """
    variables = euclidean.variables
    if euclidean.dimension != 1 or len(variables) > MOST_DEGREES or euclidean.links:
        what = "a field" if euclidean.dimension != 1 else f"{len(variables)} degrees of freedom"
        raise SpectrumError(f"propagation takes one or two degrees of freedom; this is {what}: sample it instead")
    if euclidean.spheres or euclidean.sources:
        what = "a constraint" if euclidean.spheres else "a source"
        raise SpectrumError(f"propagation takes no action with {what}: sample it instead")
    if any(a.paths for a in euclidean.drift):
        raise SpectrumError("propagation takes a constant drift only; here it depends on the path: sample it instead")
    scalars = coupling_values(couplings)

    def number(expression: Expression) -> float:
        return float(expression.evaluate(scalars, np))

    return System(
        mass=np.array([[number(e) for e in row] for row in euclidean.mass]),
        potential=function_of_points(euclidean.potential, euclidean, couplings),
        gradient=[function_of_points(euclidean.potential.diff(v), euclidean, couplings) for v in variables],
        periods=[None if p is None else number(p) for p in euclidean.periods],
        flux=np.array([number(a) for a in euclidean.drift]),
    )


def function_of_points(expression: Expression, euclidean: EuclideanAction, couplings: Mapping[str, float]) -> OfPoints:
    """An expression of the paths, as a function of one array for each of them."""
    scalars = coupling_values(couplings)

    def function(*q: Any) -> Floats:
        lookup: dict[Atom, Any] = {**scalars, **dict(zip(euclidean.variables, q, strict=True))}
        with np.errstate(all="ignore"):
            value = expression.evaluate(lookup, np)
        return np.broadcast_to(np.asarray(value, dtype=np.float64), np.shape(q[0])).copy()

    return function
