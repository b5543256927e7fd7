"""Thermal averages: traces with exp(-beta H) over the eigenstates of a basis."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Basis, Numbers
from quarterturn.imaginary.observables import Diagonal, Observer
from quarterturn.imaginary.problem import Local
from quarterturn.imaginary.product_observables import ProductObserver, Several, observer

Floats = NDArray[np.float64]
DAMPED = 28.0  # exp(-28) = 7e-13 of a wave is left
NEGLIGIBLE = 1e-17  # weights below are left out


Refined = TypeVar("Refined")


def finer_for_kinks(
    operators: Sequence[Diagonal | Numbers],
    times: Floats,
    basis: Basis | Several,
    mass: float,
    refine: Callable[[float], Refined],
) -> Refined | None:
    """A solution in a basis that holds what kinks of observables make, None where this one does.

    A smooth function makes no wave that the basis does not hold; a kink makes arbitrarily fast ones, which only time
    damps. `refine` solves on a grid for waves up to a kinetic energy. Raises SpectrumError where times are too short.
    """
    if isinstance(basis, Several) or all(isinstance(o, Diagonal) for o in operators) or not times.any():
        return None
    shortest = float(np.min(np.abs(times[times != 0])))
    if (needed := DAMPED / shortest) <= np.max(basis.momenta**2) / (2 * mass):
        return None
    try:
        return refine(needed)
    except SpectrumError as trouble:
        raise SpectrumError(
            f"an observable with a kink or a step is not resolved at t = {shortest:g}: {trouble.message}"
        ) from trouble


@dataclass(frozen=True, eq=False)
class Thermal:
    """A spectrum at inverse temperature `beta`."""

    basis: Basis | Several
    mass: float
    values: Floats  # (M,) ascending
    vectors: Numbers  # (M, M)
    beta: float
    refine: Callable[[float], Thermal]  # the same, on a grid that holds waves up to a kinetic energy

    @cached_property
    def probabilities(self) -> Floats:
        """(s,) Boltzmann weights of the states that carry any."""
        p = np.exp(-self.beta * (self.values - self.values[0]))
        p = p[p > NEGLIGIBLE]
        return np.asarray(p / p.sum())

    @cached_property
    def _observer(self) -> Observer | ProductObserver:
        return observer(self.basis, self.vectors[:, : len(self.probabilities)], self.probabilities)

    def partition(self) -> float:
        """Z = sum exp(-beta E_n)."""
        return float(np.exp(-self.beta * self.free_energy()))

    def free_energy(self) -> float:
        """-ln Z / beta."""
        return float(self.values[0] + np.log(self.probabilities[0]) / self.beta)

    def energy(self) -> float:
        """<H>."""
        return float(self.probabilities @ self.values[: len(self.probabilities)])

    def heat_capacity(self) -> float:
        """beta^2 (<H^2> - <H>^2)."""
        from_mean = self.values[: len(self.probabilities)] - self.energy()
        return float(self.beta**2 * (self.probabilities @ from_mean**2))

    def expectation(self, f: Local) -> float:
        """<f(q)>."""
        states = self.vectors[:, : len(self.probabilities)]
        diagonal = np.sum(states.conj() * (self._observer.operator(f) @ states), axis=0)
        return float(np.real(diagonal) @ self.probabilities)

    def correlator(self, f: Local, g: Local, t: Floats) -> Numbers:
        """Euclidean time-ordered <f(t) g(0)>, (T,), at times of either sign up to beta; complex with flux.

        Raises SpectrumError for times beyond beta.
        """
        times = np.atleast_1d(np.asarray(t, dtype=np.float64))
        if (np.abs(times) > self.beta * (1 + 1e-12)).any():
            raise SpectrumError(f"t = {np.max(np.abs(times)):g} lies beyond beta = {self.beta:g}")
        later = np.where(times < 0, times + self.beta, times)  # periodic: f at t - beta is f at t
        operators = [self._observer.operator(h) for h in (f, g)]
        apart = np.minimum(later, self.beta - later)
        if (finer := finer_for_kinks(operators, apart, self.basis, self.mass, self.refine)) is not None:
            return finer.correlator(f, g, times)
        left, right = (self.vectors.conj().T @ (o @ self.vectors) for o in operators)
        above = self.values - self.values[0]
        before = np.exp(-np.clip(self.beta - later, 0.0, None)[:, None] * above[None, :])
        after = np.exp(-later[:, None] * above[None, :])
        result = np.sum((before @ (left * right.T)) * after, axis=1) * self.probabilities[0]
        at_once = (later == 0) | (later == self.beta)
        if at_once.any():
            result[at_once] = self.expectation(lambda q: f(q) * g(q))
        return np.asarray(result)
