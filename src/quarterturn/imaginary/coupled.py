"""Two and three degrees of freedom as the solvers of this room take them, and coordinates in which they separate best.

The coordinates of the solvers are q = S x, S mixing only variables on the line. Where the inverse mass matrix, or the
curvature of V round its lowest point, couples such variables, S leads to normal modes (Wilson, Decius and Cross,
Molecular Vibrations, 1955, ch. 2), chosen sparse among degenerate ones so that reflections of the action stay visible.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError

Floats = NDArray[np.float64]
Field = Callable[[Floats], Floats]  # of the paths at one time, (C, …), to (…)
COUPLED = 0.5  # a mixed curvature, relative to the diagonal ones, from which on normal modes are better
MOST = 3


@dataclass(frozen=True)
class CoupledPaths:
    """L_E = q' K q'/2 + V(q) - i sum A_i(q) q_i', on lines and circles; hbar = 1.

    H = (p - A) K^-1 (p - A)/2 + V with the symmetric order of p and A, that of the midpoint rule.
    """

    mass: Floats  # K, (C, C)
    potential: Field
    periods: tuple[float | None, ...]  # None: a line; else the circumference of a circle
    fluxes: tuple[float, ...]  # constant A of the circles; 0 on lines, where it can be transformed away
    drift: tuple[Field | None, ...]  # A where it depends on the paths

    def __post_init__(self) -> None:
        if not 2 <= self.size <= MOST:
            raise SpectrumError(f"coupled paths are solved for two and three degrees of freedom, not {self.size}")
        if not (np.isfinite(self.mass).all() and np.linalg.eigvalsh(self.mass)[0] > 0):
            raise SpectrumError(f"the mass matrix must be positive, got {self.mass.tolist()}")
        if not all(p is None or (p > 0 and math.isfinite(p)) for p in self.periods):
            raise SpectrumError(f"periods must be positive and finite, got {self.periods}")

    @property
    def size(self) -> int:
        return len(self.mass)

    @cached_property
    def lines(self) -> NDArray[np.int_]:
        return np.array([i for i, p in enumerate(self.periods) if p is None], dtype=np.int_)

    @property
    def magnetic(self) -> bool:
        return any(a is not None for a in self.drift)

    def values(self, q: Floats) -> Floats:
        """V at q, (C, …); +infinity where it is no number or a wall."""
        with np.errstate(all="ignore"):
            v = np.broadcast_to(np.asarray(self.potential(q), dtype=np.float64), q.shape[1:])
        return np.where(np.isnan(v), np.inf, v)


@dataclass(frozen=True)
class Coordinates:
    """q = S x, the inverse mass matrix there, and the problem."""

    problem: CoupledPaths
    matrix: Floats  # S, (C, C)
    inverse_mass: Floats  # of x, (C, C); diagonal among the lines

    @property
    def masses(self) -> Floats:
        return np.asarray(1 / np.diag(self.inverse_mass))

    @cached_property
    def mixed(self) -> bool:
        """Whether momenta of different coordinates are coupled."""
        off = self.inverse_mass - np.diag(np.diag(self.inverse_mass))
        return bool(np.any(off))

    def paths(self, x: Floats) -> Floats:
        """q, (C, …)."""
        return np.asarray(np.tensordot(self.matrix, x, axes=1))

    def potential(self, x: Floats) -> Floats:
        """V, and what a magnetic term adds to it, A K^-1 A/2."""
        q = self.paths(x)
        v = self.problem.values(q)
        if self.problem.magnetic:
            a = self.drift(x)
            v = v + np.einsum("i...,ij,j...->...", a, self.inverse_mass, a) / 2
        return np.asarray(v)

    def drift(self, x: Floats) -> Floats:
        """A conjugate to x', S^T A, (C, …), without the constant fluxes."""
        q = self.paths(x)
        fields = [a(q) if a is not None else np.zeros(q.shape[1:]) for a in self.problem.drift]
        return np.asarray(np.tensordot(self.matrix.T, np.stack(fields), axes=1))

    @staticmethod
    def given(problem: CoupledPaths) -> Coordinates:
        """x = q."""
        return Coordinates(problem, np.eye(problem.size), _inverse(problem.mass))

    @staticmethod
    def candidates(problem: CoupledPaths, forms: Sequence[Floats]) -> list[Coordinates]:
        """The paths themselves, where their masses do not mix lines, and axes that diagonalise quadratic forms, (L, L).

        The best guess comes first: the paths themselves unless the first form couples them strongly.
        """
        lines = np.ix_(problem.lines, problem.lines)
        inverse = _inverse(problem.mass)
        kinetic = inverse[lines]
        turned = [Coordinates._turned(problem, inverse, form) for form in forms if _coupling(form) > 1e-6]
        if np.any(kinetic - np.diag(np.diag(kinetic))):
            return turned or [Coordinates._turned(problem, inverse, np.eye(len(kinetic)))]
        given = Coordinates(problem, np.eye(problem.size), inverse)
        return [*turned[:1], given, *turned[1:]] if turned and _coupling(forms[0]) > COUPLED else [given, *turned]

    @staticmethod
    def _turned(problem: CoupledPaths, inverse: Floats, form: Floats) -> Coordinates:
        lines = np.ix_(problem.lines, problem.lines)
        root = np.linalg.cholesky(inverse[lines])
        matrix = np.eye(problem.size)
        matrix[lines] = root @ _modes(root.T @ form @ root)
        back = np.linalg.inv(matrix)
        turned = back @ inverse @ back.T
        turned[lines] = np.eye(len(root))
        return Coordinates(problem, matrix, turned)


def _inverse(mass: Floats) -> Floats:
    inverse = np.linalg.inv(mass)
    inverse = (inverse + inverse.T) / 2
    size = np.sqrt(np.outer(np.diag(inverse), np.diag(inverse)))
    return np.asarray(np.where(np.abs(inverse) > 1e-14 * size, inverse, 0.0))


def _coupling(curvature: Floats) -> float:
    diagonal = np.abs(np.diag(curvature))
    off = np.abs(curvature - np.diag(np.diag(curvature)))
    return float(np.max(off / np.sqrt(np.outer(diagonal, diagonal) + 1e-300), initial=0.0)) if len(diagonal) else 0.0


def _modes(curvature: Floats) -> Floats:
    """Orthonormal eigenvectors, columns; those of one eigenvalue with as many zeros as pivoting finds."""
    values, vectors = np.linalg.eigh(curvature)
    first = 0
    for last in range(1, len(values) + 1):
        if last < len(values) and values[last] - values[first] <= 1e-9 * np.abs(values).max():
            continue
        projector = vectors[:, first:last] @ vectors[:, first:last].T
        for k in range(first, last):
            column = projector[:, int(np.argmax(np.round(np.diag(projector), 9)))]
            vectors[:, k] = column / np.linalg.norm(column)
            projector = projector - np.outer(vectors[:, k], vectors[:, k])
        first = last
    return np.asarray(np.where(np.abs(vectors) < 1e-14, 0.0, vectors))
