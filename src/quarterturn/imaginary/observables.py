"""Functions of q between the basis functions of a grid.

A smooth function is diagonal on the grid to rounding. A function with a kink, a step or structure finer than the grid
is not: |q| would be wrong by the square of the step. Whether a function is smooth enough is tested by the trapezoidal
rule on the grid against the one on the grid and its midpoints; where they differ, the integrals are done by Gauss
quadrature on cells that are halved round the kink until nothing changes.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.polynomial.legendre import leggauss
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Basis, Numbers
from quarterturn.imaginary.problem import Local

Floats = NDArray[np.float64]
NODES, WEIGHTS = leggauss(10)
DEPTH = 48  # halvings of a cell
CELL = 1e-13  # of the whole integral, the change of a cell that is halved again
SMOOTH = 2e-12  # of the integral of |f|, between the two trapezoidal rules


@dataclass(frozen=True, eq=False)
class Diagonal:
    """A function that is diagonal on the grid."""

    values: Numbers  # (M,)

    def __matmul__(self, vectors: Numbers) -> Numbers:
        return np.asarray((self.values * vectors.T).T)


@dataclass(frozen=True, eq=False)
class Observer:
    """Turns functions into operators, looked at with the states that matter: columns of `states`, with weights."""

    basis: Basis
    states: Numbers  # (M, s)
    weights: Floats  # (s,)

    @cached_property
    def _density(self) -> Floats:
        """(M,), sum over the grid = 1."""
        return self._weighted(self.states)

    @cached_property
    def _tests(self) -> tuple[Floats, Numbers, Numbers]:
        """Points midway between those of the grid; the density times a constant and a slow wave, on both, (2, M).

        The wave has no symmetry that a function could share, so that the error of a kink does not cancel in both.
        """
        x, q = self.basis.edges[1:-1], self.basis.grid
        mean = self._density @ q
        slow = 1.7j / np.sqrt(self._density @ (q - mean) ** 2)

        def both(density: Floats, y: Floats) -> Numbers:
            return np.stack([density + 0j, density * np.exp(slow * (y - mean))])

        between = self._weighted(self.basis.at(x) @ self.states) * self.basis.step
        return x, both(self._density, q), both(between, x)

    def _weighted(self, waves: Numbers) -> Floats:
        return np.asarray((np.abs(waves) ** 2) @ (self.weights / self.weights.sum()))

    def operator(self, f: Local) -> Diagonal | Numbers:
        """f(q) as an operator on the grid.

        Raises SpectrumError where f is not finite, or its integral does not exist.
        """
        values = evaluated(f, self.basis.grid)
        x, on_grid, between = self._tests
        if np.max(np.abs(on_grid @ values - between @ evaluated(f, x))) <= SMOOTH * (np.abs(values) @ self._density):
            return Diagonal(values)
        return integrated(f, self.basis, self._density)


def integrated(f: Local, basis: Basis, density: Floats) -> Numbers:
    """<i|f|j> between the basis functions by quadrature on halved cells, (M, M).

    `density`, (M,), says where on the grid accuracy is needed. Raises SpectrumError where f is too singular.
    """
    x, w, _ = nodes(f, basis, density)
    functions = basis.at(x)
    matrix = functions.conj().T @ ((w * evaluated(f, x))[:, None] * functions)
    return np.asarray((matrix + matrix.conj().T) / 2)


def nodes(f: Local, basis: Basis, density: Floats) -> tuple[Floats, Floats, int]:
    """Quadrature nodes and weights for f times products of basis functions, and how often a cell was halved."""
    left, right = basis.edges[:-1], basis.edges[1:]
    ceiling, scale = density + 1e-16, 0.0
    kept: list[tuple[Floats, Floats]] = []
    for depth in range(DEPTH):
        middle = (left + right) / 2
        x, w = _gauss(left, right)
        parts = [_gauss(left, middle), _gauss(middle, right)]
        whole, *halves = (np.sum(evaluated(f, p.ravel()).reshape(p.shape) * u, axis=1) for p, u in [(x, w), *parts])
        scale = scale or float(np.sum(np.abs(whole) * ceiling))
        good = np.abs(whole - halves[0] - halves[1]) * ceiling <= CELL * scale
        kept.append((x[good].ravel(), w[good].ravel()))
        if good.all():
            return np.concatenate([p for p, _ in kept]), np.concatenate([u for _, u in kept]), depth
        left, middle, right = left[~good], middle[~good], right[~good]
        left, right, ceiling = np.r_[left, middle], np.r_[middle, right], np.r_[ceiling[~good], ceiling[~good]]
    raise SpectrumError(f"an average does not exist: its integrand is too singular at q = {left[0]:.6g}")


def _gauss(left: Floats, right: Floats) -> tuple[Floats, Floats]:
    half = ((right - left) / 2)[:, None]
    return left[:, None] + half * (1 + NODES), half * WEIGHTS


def evaluated(f: Local, q: Floats) -> Floats:
    """f at q, broadcast. Raises SpectrumError where it is not finite."""
    with np.errstate(all="ignore"):
        value = np.asarray(f(q))
    value = value if value.shape == q.shape else np.broadcast_to(value, q.shape)
    if not np.isfinite(value).all():
        raise SpectrumError(f"an observable is not finite at q = {q[~np.isfinite(value)][0]:.6g}")
    return np.asarray(value)
