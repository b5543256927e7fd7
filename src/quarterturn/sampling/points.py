"""The potential and its derivatives at points of configuration space, in NumPy: what is needed outside the chains."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Expression, Symbol
from quarterturn.compiled.target import Parameters, Target

Floats = NDArray[np.float64]


class PointAction:
    """V(x), its gradient and diagonal curvatures for whitened points x, at fixed couplings and spacing."""

    def __init__(self, target: Target, p: Parameters) -> None:
        self.target = target
        self.spacing = float(p.spacing)
        self.unwhitening = np.asarray(p.unwhitening)
        self.scalars: dict[Atom, float] = {atom: float(value) for atom, value in target.scalars(p).items()}
        names = [Symbol("source", s.name) for s in target.euclidean.sources]
        self.silent: dict[Atom, Any] = dict.fromkeys(names, 0.0)  # a reference knows no source
        self.sources: dict[Atom, Any] = dict(zip(names, np.asarray(p.sources), strict=True))  # each (sites,)
        variables = target.euclidean.variables
        self.hessian = tuple(tuple(g.diff(atom) for atom in variables) for g in target.gradient)

    @property
    def beta(self) -> float:
        return self.spacing * self.target.sites

    def potential(self, x: Floats) -> Floats:
        """V at x of shape (C, …) without sources, shape (…); nan or inf where it has no value."""
        return self._values((self.target.euclidean.potential,), x, self.silent)[0]

    def gradient(self, x: Floats) -> Floats:
        """dV/dx, (C, …)."""
        return np.tensordot(self.unwhitening, self._values(self.target.gradient, x, self.silent), axes=1)

    def curvature(self, x: Floats) -> Floats:
        """d^2 V/dx_c^2, (C, …)."""
        rows = np.stack([self._values(row, x, self.silent) for row in self.hessian])
        return np.einsum("ci,ij...,cj->c...", self.unwhitening, rows, self.unwhitening)

    def path_action(self, x: Floats) -> Floats:
        """Re S of paths (chains, C, sites) without winding, (chains,)."""
        links = np.roll(x, -1, axis=-1) - x
        kinetic = np.sum(links**2, axis=(1, 2)) / (2 * self.spacing)
        potential = self._values((self.target.euclidean.potential,), np.moveaxis(x, 1, 0), self.sources)[0]
        return kinetic + self.spacing * np.sum(potential, axis=-1)

    def _values(self, expressions: tuple[Expression, ...], x: Floats, sources: Mapping[Atom, Any]) -> Floats:
        q = np.tensordot(self.unwhitening.T, x, axes=1)
        lookup: dict[Atom, Any] = {
            **self.scalars,
            **sources,
            **dict(zip(self.target.euclidean.variables, q, strict=True)),
        }
        with np.errstate(all="ignore"):
            return np.stack(
                [np.broadcast_to(np.asarray(e.evaluate(lookup, np), float), x.shape[1:]) for e in expressions]
            )


def lowest_frequency_squared(points: PointAction) -> Floats:
    """Smallest useful Omega^2, (C,): 0 on the line; for an angle the one with which its mean drifts half round.

    A free mean moves by the angle of a trajectory, about 3/2, times a velocity of variance 1 / (beta Omega^2).
    """
    target = points.target
    if not target.angles:
        return np.zeros(target.components)
    circumference = np.linalg.norm(np.linalg.inv(points.unwhitening).T * target.periods, axis=1)
    round_ = np.where(circumference > 0, 9 / (points.beta * np.where(circumference > 0, circumference, 1.0) ** 2), 0.0)
    return np.maximum(round_, points.beta**-2)
