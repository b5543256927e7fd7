"""Levels, wave functions, and what follows from them in the vacuum; `at` gives the same at a temperature."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Basis, Numbers
from quarterturn.imaginary.problem import Local
from quarterturn.imaginary.product_observables import Several, observer
from quarterturn.imaginary.thermal import Thermal, finer_for_kinks

Floats = NDArray[np.float64]
THERMAL_RESIDUE = 34.0  # states suppressed by more than exp(-34) = 2e-15 are left out of thermal sums
UNDISTURBED = 20.0  # exponent by which a correlator's walk to the end of the box and back must be suppressed


@dataclass(frozen=True, eq=False)
class Spectrum:
    """Levels with error estimates, and the wave functions behind them. Units of the notation, hbar = 1.

    The sums over states run over the whole basis, so that products of operators are complete at equal times; of its
    levels only the first `reliable` are converged one by one.
    """

    energies: Floats  # (count,) as asked for, ascending
    errors: Floats  # (count,)
    basis: Basis | Several
    mass: float
    values: Floats  # (M,) all eigenvalues in the basis
    vectors: Numbers  # (M, M) orthonormal; real, but on a circle with flux
    reliable: int
    threshold: float  # where a continuum begins; infinity where there is none
    facts: Mapping[str, str]
    extend: Callable[[float], Spectrum]  # the same problem, solved up to an energy above the vacuum
    refine: Callable[[float], Spectrum]  # the same, on a grid that holds waves up to a kinetic energy
    residue: float = THERMAL_RESIDUE

    @property
    def grid(self) -> Floats:
        """(M,) points of the path; of several paths (C, M)."""
        return self.basis.grid

    @cached_property
    def weights(self) -> Floats:
        """(M,) of the quadrature on the grid."""
        return np.broadcast_to(np.asarray(self.basis.step), self.grid.shape[-1:])

    @cached_property
    def states(self) -> Numbers:
        """(M, count) wave functions on the grid, sum weights |psi|^2 = 1, positive on their last lobe."""
        return np.asarray(self.basis.on_grid(self.vectors[:, : len(self.energies)]) / np.sqrt(self.weights)[:, None])

    def wave(self, n: int, q: Floats) -> Numbers:
        """Wave function of level n at any points q inside the box or on the circle; of several paths q is (C, K)."""
        return np.asarray(self.basis.at(np.asarray(q, dtype=np.float64)) @ self.vectors[:, self._converged(n)])

    # --- vacuum ---------------------------------------------------------------------------------------------
    def matrix_element(self, f: Local, m: int, n: int) -> float | complex:
        """<m|f(q)|n>. Raises SpectrumError for levels beyond the converged ones."""
        pair = self.vectors[:, [self._converged(m), self._converged(n)]]
        operator = observer(self.basis, pair, np.ones(2)).operator(f)
        element = pair[:, 0].conj() @ (operator @ pair[:, 1:])[:, 0]
        return complex(element) if np.iscomplexobj(element) else float(element)

    def expectation(self, f: Local, beta: float | None = None) -> float:
        """<f(q)> in the vacuum, or at inverse temperature beta."""
        if beta is not None:
            return self.at(beta).expectation(f)
        return float(np.real(self.matrix_element(f, 0, 0)))

    def correlator(self, f: Local, g: Local, t: Floats, beta: float | None = None) -> Numbers:
        """Euclidean time-ordered <f(t) g(0)>, (T,), at the times `t` of either sign; vacuum or thermal.

        Raises SpectrumError at times so long that a continuum above the bound states is felt and not resolved.
        """
        if beta is not None:
            return self.at(beta).correlator(f, g, t)
        times = np.atleast_1d(np.asarray(t, dtype=np.float64))
        self._continuum_is_resolved(float(np.max(np.abs(times), initial=0.0)))
        vacuum = self.vectors[:, :1]
        operators = [observer(self.basis, vacuum, np.ones(1)).operator(h) for h in (f, g)]
        if (finer := finer_for_kinks(operators, times, self.basis, self.mass, self.refine)) is not None:
            return finer.correlator(f, g, times)
        left, right = ((o @ vacuum)[:, 0].conj() @ self.vectors for o in operators)
        decays = np.exp(-np.abs(times)[:, None] * (self.values - self.values[0])[None, :])
        forward = decays @ (left * right.conj())
        result = np.where(times >= 0, forward, forward.conj())
        if (times == 0).any():
            result[times == 0] = self.expectation(lambda q: f(q) * g(q))
        return result

    def _converged(self, n: int) -> int:
        if not 0 <= n < self.reliable:
            raise SpectrumError(f"level {n} is not among the {self.reliable} converged ones: ask for more levels")
        return n

    def _continuum_is_resolved(self, longest: float) -> None:
        if not np.isfinite(self.threshold) or isinstance(self.basis, Several):
            return
        mean = np.abs(self.vectors[:, 0]) ** 2 @ self.grid
        distance = min(mean - self.grid[0], self.grid[-1] - mean)
        suppressed = 2 * self.mass * distance**2 > UNDISTURBED * longest
        if not suppressed and (self.threshold - self.values[0]) * longest < UNDISTURBED:
            raise SpectrumError(
                f"at t = {longest:g} the continuum above V = {self.threshold:.6g} contributes, which is resolved only "
                f"up to t = {2 * self.mass * distance**2 / UNDISTURBED:.3g}"
            )

    # --- thermal --------------------------------------------------------------------------------------------
    def at(self, beta: float) -> Thermal:
        """Everything at inverse temperature beta; more levels are solved for where beta demands them.

        Raises SpectrumError where a continuum makes thermal sums diverge with the box, or too many levels are needed.
        """
        if not (beta > 0 and np.isfinite(beta)):
            raise SpectrumError(f"beta must be positive and finite, got {beta}")
        if np.isfinite(self.threshold):
            raise SpectrumError(
                f"a continuum begins at V = {self.threshold:.6g}: thermal sums diverge with the size of the box"
            )
        try:
            enough = self.values[self.reliable - 1] >= self.values[0] + self.residue / beta
            return (self if enough else self.extend(self.residue / beta))._thermal(beta)
        except SpectrumError as trouble:
            raise SpectrumError(f"beta = {beta:g} is too high a temperature: {trouble.message}") from trouble

    def _thermal(self, beta: float) -> Thermal:
        return Thermal(
            self.basis, self.mass, self.values, self.vectors, beta, lambda kinetic: self.refine(kinetic)._thermal(beta)
        )

    def partition(self, beta: float) -> float:
        """Z = sum exp(-beta E_n)."""
        return self.at(beta).partition()

    def free_energy(self, beta: float) -> float:
        """-ln Z / beta."""
        return self.at(beta).free_energy()

    def energy(self, beta: float) -> float:
        """<H>."""
        return self.at(beta).energy()

    def heat_capacity(self, beta: float) -> float:
        """beta^2 (<H^2> - <H>^2)."""
        return self.at(beta).heat_capacity()
