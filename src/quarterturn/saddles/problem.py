"""A few paths as the solvers of this room take them: unit mass, and the potential with two derivatives.

The derivatives are taken of the symbolic potential, exactly. With the mass matrix K = C C^T the coordinates x = C^T q
have L_E = 1/2 x'^2 + V; a path is solved for in x and reported in q.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Expression, PathAtom, Symbol
from quarterturn.actions.model import EuclideanAction
from quarterturn.errors import SaddleError

Floats = NDArray[np.float64]
MOST_PATHS = 4


@dataclass(frozen=True, eq=False)
class Problem:
    """V(q) of n variables with its derivatives, at arrays of shape (n, ...); `to_q` turns x into q."""

    variables: tuple[Atom, ...]
    potential: Expression
    scalars: Mapping[Atom, float]
    to_q: Floats = field(default_factory=lambda: np.eye(1))  # (n, n)
    periods: tuple[float | None, ...] = (None,)  # of q

    @property
    def size(self) -> int:
        return len(self.variables)

    @cached_property
    def _slopes(self) -> tuple[Expression, ...]:
        return tuple(self.potential.diff(v) for v in self.variables)

    @cached_property
    def _curvatures(self) -> tuple[tuple[Expression, ...], ...]:
        return tuple(tuple(slope.diff(v) for v in self.variables) for slope in self._slopes)

    def _at(self, expression: Expression, q: Floats) -> Floats:
        lookup: dict[Atom, Any] = {**self.scalars, **dict(zip(self.variables, q, strict=True))}
        with np.errstate(all="ignore"):
            value = expression.evaluate(lookup, np)
        return np.broadcast_to(np.asarray(value, dtype=np.float64), q.shape[1:]).copy()

    def q(self, x: Floats) -> Floats:
        return np.asarray(np.tensordot(self.to_q, x, axes=1))

    def x(self, q: Floats) -> Floats:
        return np.asarray(np.tensordot(np.linalg.inv(self.to_q), q, axes=1))

    def value(self, x: Floats) -> Floats:
        """V, shape (...)."""
        return self._at(self.potential, self.q(x))

    def slope(self, x: Floats) -> Floats:
        """dV/dx, shape (n, ...)."""
        q = self.q(x)
        return np.asarray(np.tensordot(self.to_q.T, np.stack([self._at(s, q) for s in self._slopes]), axes=1))

    def curvature(self, x: Floats) -> Floats:
        """d2V/dx2, shape (..., n, n)."""
        q = self.q(x)
        rows = [np.stack([self._at(c, q) for c in row], axis=-1) for row in self._curvatures]
        return np.asarray(self.to_q.T @ np.stack(rows, axis=-2) @ self.to_q)


def paths_problem(euclidean: EuclideanAction, couplings: Mapping[str, float]) -> Problem:
    """The problem that an action of paths states.

    Raises SaddleError for more variables than are handled, unit vectors, sources, lattice actions and magnetic terms.
    """
    n = len(euclidean.variables)
    if n > MOST_PATHS:
        raise SaddleError(
            f"saddles are solved for up to {MOST_PATHS} paths; there are {n} degrees of freedom: sample them instead"
        )
    if euclidean.spheres:
        raise SaddleError("saddles are solved for paths on lines and circles, not for unit vectors: sample it instead")
    if euclidean.sources:
        raise SaddleError("a source makes the action depend on time explicitly; leave it out, or sample instead")
    if euclidean.links:
        raise SaddleError("SE is an action on a lattice; saddles are solved in the continuum: write L or LE, or sample")
    if any(a.paths for a in euclidean.drift) and n > 1:
        raise SaddleError(
            "a term linear in the velocity that depends on the path makes its saddles complex; only real ones are "
            "solved for: use levels or sample"
        )
    scalars: dict[Atom, float] = {Symbol("coupling", name): float(v) for name, v in couplings.items()}
    mass = np.array([[float(k.evaluate(scalars, np)) for k in row] for row in euclidean.mass])
    return Problem(
        variables=euclidean.variables,
        potential=euclidean.potential,
        scalars=scalars,
        to_q=np.linalg.inv(np.linalg.cholesky(mass).T),
        periods=tuple(None if p is None else float(p.evaluate(scalars, np)) for p in euclidean.periods),
    )


def field_problem(potential: Expression, atom: PathAtom, couplings: Mapping[str, float]) -> Problem:
    """One scalar with unit kinetic term, on a line."""
    scalars: dict[Atom, float] = {Symbol("coupling", name): float(v) for name, v in couplings.items()}
    return Problem((atom,), potential, scalars)
