"""From the turned action to the numbers that the solvers of this room take.

The only thing shared with the sampler is the symbolic action itself; it is evaluated here with NumPy.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Expression, Symbol
from quarterturn.actions.model import EuclideanAction
from quarterturn.imaginary.problem import OnePath

Floats = NDArray[np.float64]


def coupling_values(couplings: Mapping[str, float]) -> dict[Atom, float]:
    return {Symbol("coupling", name): value for name, value in couplings.items()}


def local_function(
    expression: Expression, euclidean: EuclideanAction, couplings: Mapping[str, float]
) -> Callable[[Floats], Floats]:
    """An expression of the one path, as a function of an array of its values."""
    scalars = coupling_values(couplings)
    (atom,) = euclidean.variables

    def function(q: Floats) -> Floats:
        with np.errstate(all="ignore"):
            value = expression.evaluate({**scalars, atom: q}, np)
        return np.broadcast_to(np.asarray(value, dtype=np.float64), np.shape(q)).copy()

    return function


def one_path(euclidean: EuclideanAction, couplings: Mapping[str, float]) -> OnePath | None:
    """The problem of one degree of freedom, or None where the action has more, or a drift that depends on the path."""
    if len(euclidean.variables) != 1 or euclidean.drift[0].paths or euclidean.sources:
        return None
    scalars = coupling_values(couplings)
    period = euclidean.periods[0]
    return OnePath(
        mass=float(euclidean.mass[0][0].evaluate(scalars, np)),
        potential=local_function(euclidean.potential, euclidean, couplings),
        period=None if period is None else float(period.evaluate(scalars, np)),
        flux=float(euclidean.drift[0].evaluate(scalars, np)),
        even=(-1,) in euclidean.symmetries or _is_even(euclidean),
    )


def _is_even(euclidean: EuclideanAction) -> bool:
    """V(-q) = V(q), whatever the drift."""
    (atom,) = euclidean.variables
    turned = euclidean.potential.substitute(lambda a: -Expression.of(atom) if a == atom else None)
    return turned == euclidean.potential
