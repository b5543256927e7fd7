"""Spectral lines of two operators, and every correlator that they make: Euclidean, real-time, and the response.

<f(t) g(0)> is a sum of exponentials whose frequencies are differences of levels. With t -> -i tau it is the Euclidean
correlator; in the vacuum t is to be read as t (1 - i eps), which is what picks the vacuum out of any state, and the
quarter turn back, tau -> tau exp(i angle) from 0 to pi/2, meets no singularity since all frequencies are positive.
Kubo, J. Phys. Soc. Japan 12 (1957) 570, for the response and for temperatures.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from quarterturn.errors import SpectrumError
from quarterturn.imaginary.basis import Numbers
from quarterturn.imaginary.problem import Local
from quarterturn.imaginary.product_observables import observer
from quarterturn.imaginary.spectrum import Spectrum
from quarterturn.imaginary.thermal import Thermal
from quarterturn.imaginary.warm import warmed

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
ROUNDING = 1e-14  # of a sum of weights, relative to the norms of its factors
NEGLIGIBLE = 1e-16  # weights below, relative to the largest, are left out
SAME = 1e-10  # thermal frequencies closer than this, relative to the largest, are one line


@dataclass(frozen=True, eq=False)
class Lines:
    """<f(t) g(0)> = sum weights exp(-i frequencies t), for Hermitian f and g; vacuum or thermal.

    `uncertain` is the weight that belongs to states whose energies are not converged, or that the basis lacks, and
    rounding; `energy_error` is that of a frequency. A correlator at time t is wrong by `error(t)`, about.
    """

    frequencies: Floats  # (K,) ascending; negative ones only at a temperature
    weights: Numbers  # (K,) <m|f|n><n|g|m> times the probability of m
    beta: float | None  # None: the vacuum
    uncertain: float
    means: tuple[float, float]  # <f>, <g>
    energy_error: float

    def error(self, longest: float) -> float:
        """Of a correlator at real times up to `longest`."""
        return self.uncertain + self.energy_error * longest * float(np.sum(np.abs(self.weights)))

    @cached_property
    def _conjugate(self) -> Numbers:
        return np.asarray(self.weights.conj())

    def euclidean(self, tau: Floats) -> Numbers:
        """<f(-i tau) g(0)>, (T,), for tau >= 0, at a temperature up to beta."""
        self._inside(tau, tau)
        return np.asarray(np.exp(-np.multiply.outer(tau, self.frequencies)) @ self.weights)

    def as_written(self, t: Floats) -> Complexes:
        """The Wightman function <f(t) g(0)>, operators in this order, at real times of either sign, (T,)."""
        return np.asarray(np.exp(-1j * np.multiply.outer(t, self.frequencies)) @ self.weights, dtype=np.complex128)

    def time_ordered(self, t: Floats) -> Complexes:
        """<T f(t) g(0)>: the later operator stands to the left, (T,)."""
        later = self.as_written(np.abs(t))
        earlier = np.exp(-1j * np.multiply.outer(np.abs(t), self.frequencies)) @ self._conjugate  # <g(0) f(t)>
        return np.where(t >= 0, later, earlier)

    def rotated(self, t: Floats, angle: float) -> Complexes:
        """The Euclidean correlator at tau = t exp(i angle), t >= 0: Euclidean at 0, real-time at pi/2, (T,)."""
        tau = np.asarray(t) * np.exp(1j * angle)
        self._inside(t, tau.real)
        return np.asarray(np.exp(-np.multiply.outer(tau, self.frequencies)) @ self.weights, dtype=np.complex128)

    def _inside(self, t: Floats, tau: Floats) -> None:
        if (np.asarray(t) < 0).any():
            raise SpectrumError("operators in a fixed order have a Euclidean correlator at times that are not negative")
        if self.beta is not None and (np.asarray(tau) > self.beta * (1 + 1e-12)).any():
            raise SpectrumError(f"t = {np.max(tau):g} lies beyond beta = {self.beta:g}")

    # --- commutator ---------------------------------------------------------------------------------------------
    @cached_property
    def commutator(self) -> tuple[Floats, Numbers]:
        """Frequencies and weights of <[f(t), g(0)]>, the spectral function; antisymmetric for f = g.

        Lines at zero frequency cancel and are left out.
        """
        moving = np.abs(self.frequencies) > SAME * np.max(np.abs(self.frequencies), initial=0.0)
        omega, weights = self.frequencies[moving], self.weights[moving]
        return _merged(np.concatenate([omega, -omega]), np.concatenate([weights, -weights.conj()]))

    def susceptibility(self, z: Complexes) -> Complexes:
        """chi(z) = int_0^inf dt exp(i z t) i <[f(t), g(0)]> = sum commutator weights / (frequency - z), (Z,)."""
        omega, weights = self.commutator
        return np.asarray((1 / (omega - np.asarray(z, dtype=np.complex128)[:, None])) @ weights)

    def response_in_time(self, t: Floats) -> Floats:
        """i <[f(t), g(0)]> for t >= 0, zero before, (T,)."""
        omega, weights = self.commutator
        return np.where(t >= 0, np.real(1j * (np.exp(-1j * np.multiply.outer(t, omega)) @ weights)), 0.0)

    @cached_property
    def static(self) -> float:
        """d<f>/dJ for a constant source, H - J g, in equilibrium: int_0^beta (<f(tau) g> - <f><g>) dtau."""
        omega, weights = self.frequencies, self.weights
        still = np.abs(omega) <= SAME * np.max(np.abs(omega), initial=0.0)
        if self.beta is None:
            return float(2 * np.sum(np.real(weights[~still]) / omega[~still]))
        moving = np.sum(np.real(weights[~still]) * -np.expm1(-self.beta * omega[~still]) / omega[~still])
        return float(moving + self.beta * (np.sum(np.real(weights[still])) - self.means[0] * self.means[1]))

    def driven(self, t: Floats, source: Floats) -> Floats:
        """Change of <f(t)> to first order in a source J(t) that couples as H - J g, (T,).

        `t` ascends; J is zero before and is taken as linear between its points, for which each line is integrated
        exactly.
        """
        omega, weights = self.commutator
        result, memory = np.zeros(len(t)), np.zeros(len(omega), dtype=np.complex128)
        for k in range(1, len(t)):
            h = t[k] - t[k - 1]
            x = -1j * omega * h
            flat, rising = _moments(x)
            memory = np.exp(x) * memory + h * (flat * source[k - 1] + rising * (source[k] - source[k - 1]))
            result[k] = np.real(1j * (weights @ memory))
        return result


def _moments(x: Complexes) -> tuple[Complexes, Complexes]:
    """int_0^1 exp(x (1 - s)) ds and the same with a factor s."""
    small = np.abs(x) < 1e-3
    y = np.where(small, 1.0, x)
    first = np.where(small, 1 + x / 2 + x**2 / 6, (np.exp(y) - 1) / y)
    second = np.where(small, 0.5 + x / 6 + x**2 / 24, (np.exp(y) - 1 - y) / y**2)
    return first, second


def lines(spectrum: Spectrum, f: Local, g: Local, beta: float | None = None) -> Lines:
    """The lines of <f(t) g(0)>.

    Parameters
    ----------
    spectrum
        Of one degree of freedom, without a continuum.
    f, g
        Real functions of q.
    beta
        Inverse temperature; None for the vacuum.

    Raises
    ------
    SpectrumError
        A continuum begins above the bound states, or the temperature is too high.
    """
    if np.isfinite(spectrum.threshold):
        raise SpectrumError(
            f"a continuum begins at V = {spectrum.threshold:.6g}: its lines are dense, and a finite basis shows "
            "others; its Euclidean correlators can be had"
        )
    solved: Spectrum | Thermal = spectrum
    level_error = float(np.max(spectrum.errors))
    if beta is not None:
        solved, level_error = warmed(spectrum, beta)
    probabilities = solved.probabilities if isinstance(solved, Thermal) else np.ones(1)
    values, vectors, count = solved.values, solved.vectors, len(probabilities)
    states = vectors[:, :count]
    watching = observer(solved.basis, states, probabilities)
    left = states.conj().T @ (watching.operator(f) @ vectors)  # <m|f|n>
    right = vectors.conj().T @ (watching.operator(g) @ states)  # <n|g|m>
    weights = probabilities[:, None] * left * right.T
    together = np.sum(states.conj() * (watching.operator(lambda q: f(q) * g(q)) @ states), axis=0)
    converged = solved.reliable if isinstance(solved, Spectrum) else len(values) // 2
    uncertain = np.sum(np.abs(weights[:, converged:])) + abs(np.sum(weights) - together @ probabilities)
    omega, merged = _merged((values[None, :] - values[:count, None]).ravel(), weights.ravel())
    diagonal = [float(np.real(np.sum(probabilities * d))) for d in (np.diagonal(left), np.diagonal(right))]
    sizes = [np.sum(probabilities[:, None] * np.abs(m) ** 2) for m in (left, right.T)]
    uncertain += ROUNDING * np.sqrt(sizes[0] * sizes[1])
    return Lines(omega, merged, beta, float(uncertain), (diagonal[0], diagonal[1]), 2 * level_error)


def _merged(frequencies: Floats, weights: Numbers) -> tuple[Floats, Numbers]:
    """Ascending, equal frequencies as one line, negligible lines left out."""
    heavy = np.abs(weights) > NEGLIGIBLE * np.max(np.abs(weights), initial=0.0)
    order = np.argsort(frequencies[heavy], kind="stable")
    frequencies, weights = frequencies[heavy][order], weights[heavy][order]
    if not len(frequencies):
        return frequencies, weights
    starts = np.flatnonzero(np.diff(frequencies, prepend=-np.inf) > SAME * np.max(np.abs(frequencies)))
    sizes = np.add.reduceat(np.abs(weights), starts)
    centres = np.add.reduceat(np.abs(weights) * frequencies, starts) / sizes
    return np.asarray(centres), np.asarray(np.add.reduceat(weights, starts))
