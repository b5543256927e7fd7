"""From the turned action to the numbers that the solvers of this room take.

The only thing shared with the sampler is the symbolic action itself; it is evaluated here with NumPy.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Expression, Symbol
from quarterturn.actions.model import EuclideanAction
from quarterturn.errors import SpectrumError
from quarterturn.imaginary.coupled import MOST, CoupledPaths
from quarterturn.imaginary.problem import OnePath
from quarterturn.imaginary.rotor import Rotor

Floats = NDArray[np.float64]
Problem = OnePath | CoupledPaths | Rotor


def coupling_values(couplings: Mapping[str, float]) -> dict[Atom, float]:
    return {Symbol("coupling", name): value for name, value in couplings.items()}


def local_function(
    expression: Expression, euclidean: EuclideanAction, couplings: Mapping[str, float]
) -> Callable[[Floats], Floats]:
    """An expression of the paths, as a function of an array of their values: (…) of one path, (C, …) of several.

    Of a unit vector with two components it is a function of its angle.
    """
    scalars = coupling_values(couplings)
    atoms = euclidean.variables
    if euclidean.spheres == ((0, 1),):
        plane = local_function(expression, replace(euclidean, spheres=()), couplings)
        return lambda angle: plane(np.stack([np.cos(angle), np.sin(angle)]))

    def function(q: Floats) -> Floats:
        paths: dict[Atom, Floats] = {atoms[0]: q} if len(atoms) == 1 else dict(zip(atoms, q, strict=True))
        with np.errstate(all="ignore"):
            value = expression.evaluate({**scalars, **paths}, np)
        shape = np.shape(q) if len(atoms) == 1 else np.shape(q)[1:]
        return np.broadcast_to(np.asarray(value, dtype=np.float64), shape).copy()

    return function


def problem_of(euclidean: EuclideanAction, couplings: Mapping[str, float]) -> Problem:
    """The problem of one, two or three degrees of freedom, or of a unit vector with two or three components.

    Raises SpectrumError for fields on space and lattice actions, where there are more degrees of freedom, or a source
    that depends on time.
    """
    if euclidean.dimension > 1:
        raise SpectrumError("a field on space has too many degrees of freedom for a spectrum: sample it instead")
    if euclidean.links:
        raise SpectrumError("a lattice action SE has no Hamiltonian of its own: sample it, or write L")
    if euclidean.sources:
        raise SpectrumError("a source depends on time: only log Z[J] of one or two paths has an exact value")
    if euclidean.spheres:
        return _unit_vector(euclidean, couplings)
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


def _unit_vector(euclidean: EuclideanAction, couplings: Mapping[str, float]) -> OnePath | Rotor:
    """A unit vector by itself: an angle, or a rigid rotor. Raises SpectrumError where there is more."""
    components = len(euclidean.variables)
    if euclidean.spheres != (tuple(range(components)),) or components not in (2, 3):
        raise SpectrumError("a unit vector is solved by itself, with two or three components: sample it instead")
    if any(a.terms for a in euclidean.drift):
        raise SpectrumError("a unit vector is solved without terms linear in its velocity")
    scalars = coupling_values(couplings)
    mass = np.array([[float(k.evaluate(scalars, np)) for k in row] for row in euclidean.mass])
    if np.any(mass != mass[0, 0] * np.eye(components)):
        raise SpectrumError("a unit vector is solved with one moment of inertia for all its components")
    potential = local_function(euclidean.potential, euclidean, couplings)
    if components == 2:
        return OnePath(float(mass[0, 0]), potential, period=2 * np.pi)
    return Rotor(float(mass[0, 0]), potential)


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
    if len(euclidean.variables) != 1 or euclidean.drift[0].paths or not of_paths(euclidean):
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


def of_paths(euclidean: EuclideanAction) -> bool:
    """Whether this is an action of unconstrained paths in the continuum, without sources."""
    return euclidean.dimension == 1 and not (euclidean.links or euclidean.spheres or euclidean.sources)


def _is_even(euclidean: EuclideanAction) -> bool:
    """V(-q) = V(q), whatever the drift."""
    (atom,) = euclidean.variables
    turned = euclidean.potential.substitute(lambda a: -Expression.of(atom) if a == atom else None)
    return turned == euclidean.potential
