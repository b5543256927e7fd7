"""From the turned action to the numbers that the solvers of this room take.

The only thing shared with the sampler is the symbolic action itself; it is evaluated here with NumPy.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Mapping

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Expression, Symbol
from quarterturn.actions.model import EuclideanAction
from quarterturn.errors import SpectrumError
from quarterturn.imaginary.coupled import MOST, CoupledPaths
from quarterturn.imaginary.problem import OnePath

Floats = NDArray[np.float64]


def coupling_values(couplings: Mapping[str, float]) -> dict[Atom, float]:
    return {Symbol("coupling", name): value for name, value in couplings.items()}


def local_function(
    expression: Expression, euclidean: EuclideanAction, couplings: Mapping[str, float]
) -> Callable[[Floats], Floats]:
    """An expression of the paths, as a function of an array of their values: (…) of one path, (C, …) of several."""
    scalars = coupling_values(couplings)
    atoms = euclidean.variables

    def function(q: Floats) -> Floats:
        paths: dict[Atom, Floats] = {atoms[0]: q} if len(atoms) == 1 else dict(zip(atoms, q, strict=True))
        with np.errstate(all="ignore"):
            value = expression.evaluate({**scalars, **paths}, np)
        shape = np.shape(q) if len(atoms) == 1 else np.shape(q)[1:]
        return np.broadcast_to(np.asarray(value, dtype=np.float64), shape).copy()

    return function


def problem_of(euclidean: EuclideanAction, couplings: Mapping[str, float]) -> OnePath | CoupledPaths:
    """The problem of one, two or three degrees of freedom.

    Raises SpectrumError where the action has more, or a source that depends on time.
    """
    if euclidean.sources:
        raise SpectrumError("a source depends on time: only log Z[J] of one or two paths has an exact value")
    degrees = len(euclidean.variables)
    if degrees > MOST:
        raise SpectrumError(
            f"the imaginary-time solution is for up to {MOST} degrees of freedom, and here are {degrees}: sample it, "
            "or look for its saddles"
        )
    if degrees == 1:
        problem = one_path(euclidean, couplings)
        if problem is None:
            raise SpectrumError("a drift that depends on the path is solved on a line or for two or three paths only")
        return problem
    return coupled_paths(euclidean, couplings)


def coupled_paths(euclidean: EuclideanAction, couplings: Mapping[str, float]) -> CoupledPaths:
    """The problem of two or three degrees of freedom. A constant drift of a line is left out: it is a gauge."""
    scalars = coupling_values(couplings)
    periods = tuple(None if p is None else float(p.evaluate(scalars, np)) for p in euclidean.periods)
    return CoupledPaths(
        mass=np.array([[float(k.evaluate(scalars, np)) for k in row] for row in euclidean.mass]),
        potential=local_function(euclidean.potential, euclidean, couplings),
        periods=periods,
        fluxes=tuple(
            float(a.evaluate(scalars, np)) if p is not None and not a.paths else 0.0
            for a, p in zip(euclidean.drift, periods, strict=True)
        ),
        drift=_drift(euclidean, couplings),
    )


def _drift(euclidean: EuclideanAction, couplings: Mapping[str, float]) -> tuple[Callable[[Floats], Floats] | None, ...]:
    """A where it depends on the paths, in the gauge in which the symmetric part of its slopes on lines is zero at 0.

    What is taken away is the gradient of a quadratic form: it changes no level and no average of the paths, and waves
    become as slow as they can be.
    """
    atoms, lines = euclidean.variables, [i for i, p in enumerate(euclidean.periods) if p is None]
    origin: dict[Atom, float] = {**coupling_values(couplings), **dict.fromkeys(atoms, 0.0)}
    slopes = np.zeros((len(atoms), len(atoms)))
    for i, j in itertools.product(lines, lines):
        with np.errstate(all="ignore"):
            slopes[i, j] = euclidean.drift[i].diff(atoms[j]).evaluate({a: np.float64(x) for a, x in origin.items()}, np)
    even = (slopes + slopes.T) / 2
    gauge = even if np.isfinite(even).all() else np.zeros_like(even)

    def field(i: int) -> Callable[[Floats], Floats] | None:
        if not (euclidean.drift[i].paths or gauge[i].any()):
            return None
        written = local_function(euclidean.drift[i], euclidean, couplings)
        return lambda q: written(q) - np.tensordot(gauge[i], q, axes=1)

    return tuple(field(i) for i in range(len(atoms)))


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
